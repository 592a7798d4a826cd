"""`silence`: nothing sent for too long."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from auditor.dangers import silence
from auditor.logs.record import Span
from tests.dangers.cases import LIMITS, SAMPLES, TAU_CL, Bench, plain_record, where


def silent(start: int, stop: int, **changes: object) -> Bench:
    """Updates at `start` and at `stop` and none between."""
    bench = Bench(**changes)
    bench.updated[start + 1 : stop] = False
    bench.updated[[start, stop]] = True
    return bench


def test_the_overdue_part_is_flagged_with_the_update_that_ends_it() -> None:
    flag = silent(100, 140).only_flag(silence)
    assert where(flag) == (131, 141, "watch")
    assert flag.values == pytest.approx(
        {"share": 1.0, "duration_s": 600.0, "longest_silence_s": 2400.0, "max_silence_s": 1800.0}
    )
    assert flag.detail == "no update for 40 min (acceptable 30 min), for 10 min under 100 % of the likely plants"


@pytest.mark.parametrize(("gap", "expected"), [(30, []), (31, [(131, 132)])])
def test_a_gap_of_the_acceptable_length_is_acceptable(gap: int, expected: list[tuple[int, int]]) -> None:
    assert [where(flag)[:2] for flag in silent(100, 100 + gap).flags(silence)] == expected


def test_a_guard_that_rounds_up_to_whole_samples_keeps_the_limit() -> None:
    limits = replace(LIMITS, max_silence=30.5 * 60)
    assert silent(100, 131, limits=limits).flags(silence) == ()
    assert where(silent(100, 132, limits=limits).only_flag(silence))[:2] == (132, 133)


def test_a_silence_does_not_reach_over_a_hole_or_past_a_span() -> None:
    record = plain_record(spans=(Span(0, 200), Span(240, SAMPLES)))
    bench = silent(100, 240, record=record, counted=(Span(10, 200), Span(240, SAMPLES)))
    assert [where(flag)[:2] for flag in bench.flags(silence)] == [(131, 200)]


def test_an_error_outside_the_band_that_no_update_answers_is_flagged() -> None:
    bench = silent(100, 120)
    bench.y[108 : 108 + TAU_CL + 1] = 2.08
    flag = bench.only_flag(silence)
    assert where(flag) == (108, 114, "watch")
    assert flag.values == pytest.approx({"share": 1.0, "duration_s": 360.0, "unanswered_s": 360.0, "band": 0.05})
    assert flag.detail == (
        "no update for 6 min with the error beyond ±0.050 m, for 6 min under 100 % of the likely plants"
    )


def test_an_update_answers_it() -> None:
    bench = silent(100, 120)
    bench.y[108:114] = 2.08
    bench.updated[111] = True
    assert bench.flags(silence) == ()


def test_both_at_once_are_told_together() -> None:
    bench = silent(100, 150)
    bench.y[120:140] = 2.08
    flag = bench.only_flag(silence)
    assert where(flag)[:2] == (120, 151)
    assert flag.values["longest_silence_s"] == 50 * 60.0
    assert flag.values["unanswered_s"] == 20 * 60.0


def test_near_a_limit_it_is_danger() -> None:
    bench = silent(100, 140)
    bench.y[135] = 1.83
    assert where(bench.only_flag(silence)) == (131, 141, "danger")


def test_without_limits_silence_is_nobodys_danger() -> None:
    bench = silent(100, 399, limits=replace(LIMITS, max_silence=None, band=None))
    bench.y[:] = np.inf
    assert bench.flags(silence) == ()


def test_rounding_at_the_band_needs_no_answer() -> None:
    bench = silent(100, 120)
    bench.y[105:115] = 1.95 - 1e-12
    assert bench.flags(silence) == ()
