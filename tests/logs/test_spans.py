"""Spans, bridging and the hours lost."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from logs_in_memory import AUTOMATIC, PERIOD, pool_log, pool_loop, with_channel, with_mode

from auditor.logs.align import align
from auditor.logs.record import CAUSES, Span
from auditor.logs.runs import hold, latest, runs_of, thinned
from auditor.logs.spans import bridge, bridge_samples, lost_hours, spans_of


def spans_one_by_one(valid, most, shortest, cut):
    """Walk along the samples; the slow way to the same spans."""
    spans, start, last, barrier = [], None, None, False
    for k, ok in enumerate(valid):
        barrier = barrier or bool(cut[k])
        if not ok or cut[k]:
            continue
        if start is not None and (barrier or k - last - 1 > most):
            spans.append(Span(start, last + 1))
            start = None
        start = k if start is None else start
        last, barrier = k, False
    if start is not None:
        spans.append(Span(start, last + 1))
    return tuple(span for span in spans if len(span) >= shortest)


@settings(max_examples=200, deadline=None)
@given(
    valid=arrays(np.bool_, st.integers(0, 60)),
    most=st.integers(0, 5),
    shortest=st.integers(1, 8),
    cuts=st.sets(st.integers(0, 59), max_size=4),
)
def test_spans_agree_with_walking_along(valid, most, shortest, cuts):
    cut = np.isin(np.arange(len(valid)), list(cuts))
    assert spans_of(valid, most, shortest, cut) == spans_one_by_one(valid, most, shortest, cut)
    nowhere = np.zeros(len(valid), dtype=bool)
    assert spans_of(valid, most, shortest) == spans_one_by_one(valid, most, shortest, nowhere)


def test_a_hole_of_exactly_the_bridge_is_held_and_one_more_cuts():
    valid = np.ones(30, dtype=bool)
    valid[10:12] = False
    assert spans_of(valid, 2, 1) == (Span(0, 30),)
    valid[12] = False
    assert spans_of(valid, 2, 1) == (Span(0, 10), Span(13, 30))


def test_two_periods_are_always_bridged():
    assert bridge_samples(60.0, 0.0) == 2
    assert bridge_samples(60.0, 119.0) == 2
    assert bridge_samples(60.0, 300.0) == 5
    assert bridge_samples(0.1, 0.3) == 3, "0.3/0.1 is 2.9999999999999996 in binary"


def damaged_record():
    log = pool_log()
    level = log.channels["level"].copy()
    level[300:302] = np.nan
    level[500:506] = np.nan
    level[900:940] = np.nan
    cells = np.full(2000, "AUTO", dtype=object)
    cells[1500:1503] = "MAN"
    return align(with_mode(with_channel(log, level=level), cells), pool_loop(mode=AUTOMATIC)), level


def test_a_longer_bridge_holds_longer_holes_but_never_manual_operation():
    record, level = damaged_record()
    assert record.spans == (Span(0, 500), Span(506, 900), Span(940, 1500), Span(1503, 2000))
    longer = bridge(record, 600.0)
    assert longer.spans == (Span(0, 900), Span(940, 1500), Span(1503, 2000))
    assert (longer.y[500:506] == level[499]).all()
    np.testing.assert_array_equal(longer.u, record.u)
    np.testing.assert_array_equal(longer.valid, record.valid)
    assert np.isnan(longer.y[900:940]).all()
    assert longer.lost_hours == {"bad value": pytest.approx(40 / 60), "manual": pytest.approx(3 / 60)}
    told = [f for f in longer.findings if f.kind == "bridged"]
    assert [(f.count, "10 min" in f.detail) for f in told] == [(8, True)]
    assert [f.count for f in record.findings if f.kind == "bridged"] == [2]


def test_bridging_again_or_shorter_changes_nothing_that_is_held():
    record, _ = damaged_record()
    longer = bridge(record, 600.0)
    again = bridge(longer, 600.0)
    np.testing.assert_array_equal(longer.y, again.y)
    assert longer.spans == again.spans
    assert [f.detail for f in longer.findings] == [f.detail for f in again.findings]
    assert bridge(record, 0.0).spans == record.spans


def test_a_record_without_causes_is_bridged_by_its_valid_samples():
    record, _ = damaged_record()
    bare = replace(record, cause=None)
    assert bridge(bare, 600.0).spans == (Span(0, 900), Span(940, 2000))


def test_lost_hours_add_up_to_what_is_outside_the_spans():
    record, _ = damaged_record()
    outside = np.sum(~record.in_span) * PERIOD / 3600
    assert sum(record.lost_hours.values()) == pytest.approx(outside)
    cause = np.zeros(100, dtype=np.int8)
    cause[30:60] = CAUSES.index("gap")
    spans = spans_of(cause == 0, 2, 35)
    assert lost_hours(cause, spans, 3600.0) == {"short span": 30.0, "gap": 30.0}


@settings(max_examples=100, deadline=None)
@given(mask=arrays(np.bool_, st.integers(0, 40)))
def test_runs_and_latest(mask):
    starts, stops = runs_of(mask)
    rebuilt = np.zeros(len(mask), dtype=bool)
    for start, stop in zip(starts, stops, strict=True):
        assert start < stop
        assert stop == len(mask) or not mask[stop]
        rebuilt[start:stop] = True
    np.testing.assert_array_equal(rebuilt, mask)
    slow = [max([i for i in range(k + 1) if mask[i]], default=-1) for k in range(len(mask))]
    np.testing.assert_array_equal(latest(mask), slow)


def test_hold_lasts_as_long_as_it_may():
    values = np.array([np.nan, 1.0, np.nan, np.nan, np.nan, 2.0, np.nan])
    np.testing.assert_array_equal(hold(values), [np.nan, 1, 1, 1, 1, 2, 2])
    np.testing.assert_array_equal(hold(values, 2), [np.nan, 1, 1, np.nan, np.nan, 2, 2])
    broken = np.array([False, False, False, True, False, False, False])
    np.testing.assert_array_equal(hold(values, None, broken), [np.nan, 1, 1, np.nan, np.nan, 2, 2])
    assert len(hold(np.empty(0))) == 0


def test_thinning_sees_both_of_two_alternating_kinds():
    few = thinned(np.arange(1000) % 2, 100)
    assert len(few) <= 100
    assert 0.4 < few.mean() < 0.6
