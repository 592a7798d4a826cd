"""Log → record: the clock, holding, units, causes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from logs_in_memory import (
    AUTOMATIC,
    NS,
    PERIOD,
    START,
    pool_channels,
    pool_log,
    pool_loop,
    stamps_of,
    with_channel,
    with_mode,
    with_rows,
)

from auditor.errors import CannotAnswerError, LogError
from auditor.logs.align import align, require_usable
from auditor.logs.log import Log
from auditor.logs.record import CAUSES, Span
from auditor.loop import Actuator, Exclusion, Mode, Signal


def kinds(record):
    return [finding.kind for finding in record.findings]


def test_a_clean_log_comes_back_as_it_is():
    log = pool_log()
    record = align(log, pool_loop())
    for name, values in (("level", record.y), ("target", record.r), ("gate", record.u)):
        np.testing.assert_array_equal(values, log.channels[name])
    assert (record.start, record.spans, record.log_step) == (START, (Span(0, 2000),), PERIOD)
    assert record.valid.all()
    assert not record.lost_hours
    assert kinds(record) == ["coverage"]


@settings(max_examples=40, deadline=None)
@given(
    seed=st.integers(0, 10_000),
    period=st.sampled_from([0.1, 1 / 3, 1.0, 2.7, 60.0, 86400.0]),
    start=st.integers(10**17, 18 * 10**17),
    holes=st.lists(st.tuples(st.integers(1, 380), st.integers(1, 30)), max_size=4),
)
def test_aligning_what_is_aligned_changes_nothing(seed, period, start, holes):
    rows = 400
    channels = pool_channels(rows, seed)
    channels["target"] = channels["target"] + np.random.default_rng(seed).normal(0, 0.01, rows)
    for first, length in holes:
        for values in channels.values():
            values[first : min(first + length, rows - 1)] = np.nan
    time = stamps_of(rows, period, start)
    loop = pool_loop(period, setpoint=Signal(column="target", stored="every"))
    once = align(Log(time=time, channels=channels, rows=rows), loop)
    np.testing.assert_array_equal(once.time_ns(np.arange(len(once))), time)
    valid = np.isfinite(channels["level"])
    np.testing.assert_array_equal(once.valid, valid)
    np.testing.assert_array_equal(once.y[valid], channels["level"][valid])

    columns = {"level": once.y, "target": once.r, "gate": once.u}
    unused = {name: np.where(once.valid, values, np.nan) for name, values in columns.items()}
    again = align(Log(time=once.time_ns(np.arange(len(once))), channels=unused, rows=rows), loop)
    for one, other in ((once.y, again.y), (once.r, again.r), (once.u, again.u), (once.cause, again.cause)):
        np.testing.assert_array_equal(one, other)
    assert (once.spans, once.start, kinds(once)) == (again.spans, again.start, kinds(again))


def test_no_value_inside_a_span_is_missing_and_every_array_is_frozen():
    log = pool_log()
    level = log.channels["level"].copy()
    level[[5, 6, 700, 900, 901, 902]] = np.nan
    record = align(with_channel(log, level=level), pool_loop())
    for values in (record.y, record.r, record.u):
        assert np.isfinite(values[record.in_span]).all()
        assert not values.flags.writeable
    assert record.y[6] == log.channels["level"][4]
    assert record.u[6] == log.channels["gate"][6], "what was recorded stays, only the missing signal is held"
    assert record.spans == (Span(0, 900), Span(903, 2000))
    assert np.isnan(record.y[900:903]).all()


def test_scale_and_offset_are_applied_and_resolution_is_taken_as_stated():
    log = pool_log()
    loop = pool_loop(measurement=Signal(column="level", unit="cm", scale=100.0, offset=-5.0, resolution=0.1))
    record = align(log, loop)
    np.testing.assert_array_equal(record.y, 100.0 * log.channels["level"] - 5.0)
    assert record.y_quantum == 0.1


def test_constant_signals_fill_and_limits_travel():
    actuator = Actuator(column="gate", low=0.0, high=100.0, max_rate=2.0)
    record = align(pool_log(), pool_loop(setpoint=Signal(value=2.0), actuator=actuator))
    assert (record.r == 2.0).all()
    assert (record.low, record.high, record.max_rate) == (0.0, 100.0, 2.0)
    assert record.r_quantum is None


# the clock


def test_jitter_is_snapped_and_the_grid_goes_through_the_typical_phase():
    log = pool_log()
    generator = np.random.default_rng(1)
    late = 20 * NS + generator.integers(-6 * NS, 6 * NS, 2000)  # up to a tenth of the period around 20 s past
    record = align(replace(log, time=log.time + late), pool_loop())
    np.testing.assert_array_equal(record.y, log.channels["level"])
    assert abs(record.start - (START + 20 * NS)) < 1 * NS, "the median of 2000 stamps uniform over ±6 s is within 0.5 s"


def test_a_minority_of_late_rows_does_not_move_the_grid():
    log = pool_log()
    time = log.time.copy()
    time[::10] += 7 * NS
    record = align(replace(log, time=time), pool_loop())
    assert record.start == START
    np.testing.assert_array_equal(record.y, log.channels["level"])


def test_more_than_a_quarter_late_counts_for_the_next_instant():
    log = pool_log()
    time = log.time.copy()
    time[100] += 16 * NS  # a row that belongs to no instant but the next, where its own successor follows
    record = align(replace(log, time=time), pool_loop())
    assert record.y[101] == log.channels["level"][101]
    assert record.y[100] == log.channels["level"][99], "held over the instant that has no row"
    assert not record.valid[100]
    assert "bridged" in kinds(record)


def test_a_log_faster_than_the_loop_gives_the_last_row_at_or_before_each_instant():
    fast = pool_log(rows=6000, period=10.0)
    record = align(with_rows(fast, np.arange(5995)), pool_loop(period=60.0))
    np.testing.assert_array_equal(record.y, fast.channels["level"][::6])
    assert (record.start, record.log_step) == (START, 10.0)
    assert "fine-log" in kinds(record)


def test_in_a_faster_log_the_instants_are_where_the_actuator_moves():
    fast = pool_log(rows=6000, period=10.0)
    moving_at = np.repeat(fast.channels["gate"][4::6], 6)[: 6000 - 4]
    gate = np.concatenate((np.full(4, 50.0), moving_at))
    record = align(with_channel(fast, gate=gate), pool_loop(period=60.0))
    assert (record.start - START) % (60 * NS) == 40 * NS
    np.testing.assert_array_equal(record.y[:1000], fast.channels["level"][4::6])
    assert any("actuator" in f.effect for f in record.findings if f.kind == "fine-log")


def test_a_log_slower_than_the_loop_is_held_for_its_own_step():
    slow = pool_log(rows=500, period=300.0)
    kept = np.delete(np.arange(500), [100])
    record = align(with_rows(slow, kept), pool_loop(period=60.0))
    assert record.log_step == 300.0
    assert record.y[0] == record.y[4] == slow.channels["level"][0]
    assert record.y[5] == slow.channels["level"][1]
    hole = np.flatnonzero(~record.valid)
    np.testing.assert_array_equal(hole, np.arange(500, 505))  # the missing row's five instants, no more and no less
    assert record.spans == (Span(0, 500), Span(505, 2496))


def test_rows_are_put_in_order():
    log = pool_log()
    shuffled = np.random.default_rng(3).permutation(2000)
    record = align(with_rows(log, shuffled), pool_loop())
    np.testing.assert_array_equal(record.y, log.channels["level"])
    assert record.valid.all()


def test_a_clock_set_back_leaves_a_stretch_that_nobody_can_order():
    log = pool_log()
    time = log.time.copy()
    time[1000:] -= 100 * 60 * NS + 25 * NS  # rows 1000… repeat 100 minutes, 25 s off the grid
    record = align(replace(log, time=time), pool_loop())
    before = align(with_rows(log, np.arange(1000)), pool_loop())
    # the stamps of rows 1000…1100 reach from 25 s before instant 900 to 25 s before instant 1000
    assert not record.valid[901:999].any()
    assert record.valid[:899].all()
    assert record.valid[1001:].all()
    np.testing.assert_array_equal(record.y[:890], before.y[:890])
    assert "backward-clock" in kinds(record)


def test_rows_of_one_tag_after_the_other_are_no_clock_set_back():
    log = pool_log(rows=600)
    empty = np.full(600, np.nan)
    time = np.concatenate((log.time, log.time + 2 * NS))
    channels = {
        "level": np.concatenate((log.channels["level"], empty)),
        "target": np.concatenate((empty, log.channels["target"])),
        "gate": np.concatenate((empty, log.channels["gate"])),
    }
    record = align(Log(time=time, channels=channels, rows=1200), pool_loop())
    np.testing.assert_array_equal(record.y, log.channels["level"])
    np.testing.assert_array_equal(record.u, log.channels["gate"])
    assert record.valid.all()


def test_stray_stamps_are_left_out():
    log = pool_log()
    time = log.time.copy()
    time[0], time[-1], time[7] = 0, START + 10**18, np.iinfo(np.int64).min
    record = align(replace(log, time=time), pool_loop())
    assert len(record) == 1998
    assert record.valid.sum() == 1997, "one row of the log itself had no time"
    assert "backward-clock" not in kinds(record)
    assert record.start == START + 60 * NS
    assert [f.count for f in record.findings if f.kind == "stray-stamp"] == [3]


def test_a_drifting_clock_loses_hardly_a_sample():
    log = pool_log(rows=5000)
    record = align(replace(log, time=stamps_of(5000, 60.01)), pool_loop())  # 0.83 periods over the log
    assert record.log_step == PERIOD
    assert np.sum(~record.valid) <= 1  # where the phase passes a quarter of the period
    assert len(record.spans) == 1


# duplicates


def test_equal_stamps_agreeing_are_one_row_and_conflicting_ones_no_value():
    log = pool_log()
    rows = np.insert(np.arange(2000), [51, 101, 151], [50, 100, 150])
    doubled = with_rows(log, rows)
    level = doubled.channels["level"].copy()
    level[np.flatnonzero(rows == 100)[1]] += 0.3  # conflicting
    level[np.flatnonzero(rows == 150)[0]] = np.nan  # only one of the two is a number
    record = align(with_channel(doubled, level=level), pool_loop())
    expected = log.channels["level"].copy()
    expected[100] = expected[99]
    np.testing.assert_array_equal(record.y, expected)
    np.testing.assert_array_equal(np.flatnonzero(~record.valid), [100])


# what is not used


def test_manual_and_excluded_cut_however_short():
    cells = np.full(2000, "AUTO", dtype=object)
    cells[1000] = "MAN"
    exclude = (Exclusion(start=START + 500 * 60 * NS, end=START + 502 * 60 * NS, why="pump swap"),)
    record = align(with_mode(pool_log(), cells), pool_loop(exclude=exclude, mode=AUTOMATIC))
    assert record.spans == (Span(0, 500), Span(503, 1000), Span(1001, 2000))
    assert record.lost_hours == {"manual": pytest.approx(1 / 60), "excluded": pytest.approx(3 / 60)}
    assert np.isfinite(record.y).all(), "what was recorded stays readable"


@pytest.mark.parametrize("cell", ["1", "1.0", " AUTO ", "AUTO", "1e0"])
def test_modes_are_compared_as_text_and_as_numbers(cell):
    record = align(with_mode(pool_log(), np.full(2000, cell, dtype=object)), pool_loop(mode=AUTOMATIC))
    assert record.valid.all()


@pytest.mark.parametrize("cell", ["auto?", "2", "10", "MAN"])
def test_other_modes_are_not_automatic(cell):
    record = align(with_mode(pool_log(), np.full(2000, cell, dtype=object)), pool_loop(mode=AUTOMATIC))
    assert not record.valid.any()


def test_an_empty_mode_cell_keeps_the_mode_and_none_before_the_first_is_no_automatic():
    cells = np.full(2000, None, dtype=object)
    cells[10], cells[20], cells[30] = "AUTO", "MAN", "AUTO"
    record = align(with_mode(pool_log(), cells), pool_loop(mode=AUTOMATIC))
    manual = np.flatnonzero(record.cause == CAUSES.index("manual"))
    np.testing.assert_array_equal(manual, [*range(10), *range(20, 30)])


def test_numbers_as_mode_column():
    log = with_channel(pool_log(), mode=np.where(np.arange(2000) < 300, 0.0, 1.0))
    record = align(log, pool_loop(mode=Mode(column="mode", automatic=(True,))))
    assert record.spans == (Span(300, 2000),)


def test_out_of_range_measurements_are_not_used():
    log = pool_log()
    level = log.channels["level"].copy()
    level[[40, 800, 801, 802]] = 5.0
    loop = pool_loop(measurement=Signal(column="level", low=0.0, high=3.0))
    record = align(with_channel(log, level=level), loop)
    assert record.y[40] == level[39]
    assert (record.cause[[40, 800]] == CAUSES.index("out of range")).all()
    assert record.spans == (Span(0, 800), Span(803, 2000))
    assert record.lost_hours == {"out of range": pytest.approx(3 / 60)}


def test_the_setpoint_stands_until_changed():
    log = pool_log()
    stored = np.full(2000, np.nan)
    changes = np.flatnonzero(np.diff(log.channels["target"], prepend=0) != 0)
    stored[changes] = log.channels["target"][changes]
    record = align(with_channel(log, target=stored), pool_loop())
    np.testing.assert_array_equal(record.r, log.channels["target"])
    assert record.valid.all()


def test_an_actuator_on_change_is_held_only_when_stated_and_until_a_bad_value():
    log = pool_log()
    gate = log.channels["gate"].copy()
    gate[100:140] = np.nan
    gate[300:340] = np.nan
    texts = np.full(2000, None, dtype=object)
    texts[300] = "Bad"
    damaged = replace(with_channel(log, gate=gate), texts={"gate": texts})
    cut = align(damaged, pool_loop())
    assert not cut.valid[100:140].any()
    held = align(damaged, pool_loop(actuator=Actuator(column="gate", stored="on-change")))
    assert (held.u[100:140] == gate[99]).all()
    assert held.valid[100:140].all()
    assert not held.valid[300:340].any()


def test_disturbances_are_held_and_never_missing():
    offtake = np.full(2000, np.nan)
    offtake[10], offtake[500] = 0.4, 0.7
    signals = (Signal(column="offtake", scale=2.0), Signal(value=1.5))
    record = align(with_channel(pool_log(), offtake=offtake), pool_loop(disturbances=signals))
    np.testing.assert_array_equal(record.w[0], np.where(np.arange(2000) < 500, 0.8, 1.4))
    assert (record.w[1] == 1.5).all()
    assert record.valid.all()


# anything at all


DAMAGES = ("drop", "shuffle", "repeat", "set back", "jitter", "empty", "flat", "huge", "round", "manual")


def damaged(log, kind: str, generator):
    """Return the log with one more damage at a random place."""
    rows = len(log.time)
    first = int(generator.integers(0, rows))
    there = np.arange(rows)[first : first + int(generator.integers(1, 60))]
    name = str(generator.choice(["level", "target", "gate"]))
    values, time, cells = log.channels[name].copy(), log.time.copy(), log.texts["mode"].copy()
    if kind == "drop":
        return with_rows(log, np.delete(np.arange(rows), there))
    if kind == "shuffle":
        return with_rows(log, np.r_[0:first, generator.permutation(np.arange(first, rows))])
    if kind == "repeat":
        return with_rows(log, np.sort(np.r_[0:rows, there]))
    if kind == "set back":
        time[first:] -= int(generator.integers(0, 100 * 60)) * NS
        return replace(log, time=time)
    if kind == "jitter":
        return replace(log, time=time + generator.integers(-20 * NS, 20 * NS, rows))
    if kind == "manual":
        cells[there] = generator.choice(["MAN", "", None, "1"])
        return with_mode(log, cells)
    values[there] = {"empty": np.nan, "flat": values[first], "huge": generator.choice([9999.0, np.inf, 1e300])}.get(
        kind, np.round(values[there], 1)
    )
    return with_channel(log, **{name: values})


@settings(max_examples=150, deadline=None)
@given(
    seed=st.integers(0, 2**32 - 1),
    rows=st.sampled_from([2, 3, 60, 400]),
    damages=st.lists(st.sampled_from(DAMAGES), max_size=6),
    stored=st.sampled_from([None, "every", "on-change"]),
    period=st.sampled_from([20.0, 60.0, 150.0]),
)
def test_whatever_the_damage_the_record_keeps_its_promises(seed, rows, damages, stored, period):
    generator = np.random.default_rng(seed)
    log = with_mode(pool_log(rows=rows, seed=seed % 100), np.full(rows, "AUTO", dtype=object))
    for kind in damages:
        log = damaged(log, kind, generator) if len(log.time) else log
    loop = pool_loop(period, measurement=Signal(column="level", low=-1e6, high=1e6, stored=stored), mode=AUTOMATIC)
    record, refusal = None, ""
    try:
        record = align(log, loop)
    except LogError as error:
        refusal = str(error)
    if record is None:
        assert len(np.unique(log.time)) < 2 or "period" in refusal
        return
    inside = record.in_span
    for values in (record.y, record.r, record.u):
        assert np.isfinite(values[inside | record.valid]).all()
    np.testing.assert_array_equal(record.valid, record.cause == 0)
    assert not (inside & np.isin(record.cause, [CAUSES.index("manual"), CAUSES.index("excluded")])).any()
    assert sum(record.lost_hours.values()) == pytest.approx(np.sum(~inside) * period / 3600)
    recorded = log.channels["level"]
    assert np.isin(record.y[inside], recorded).all(), "nothing averaged, nothing interpolated, nothing invented"
    for finding in record.findings:
        assert finding.count > 0
        assert finding.start is None or finding.start <= finding.end


# refusals


def test_every_missing_column_is_named_at_once_with_the_nearest():
    loop = pool_loop(measurement=Signal(column="levle"), actuator=Actuator(column="gaet"), mode=AUTOMATIC)
    with pytest.raises(LogError) as caught:
        align(pool_log(), loop)
    assert [p.where for p in caught.value.problems] == ["signals.measurement", "signals.actuator", "signals.mode"]
    assert [p.do for p in caught.value.problems[:2]] == ['use "level"', 'use "gate"']


@pytest.mark.parametrize("period", [1.0, 0.0, -60.0, 200_000.0])
def test_a_period_that_cannot_be_is_refused_with_numbers(period):
    with pytest.raises(LogError, match=r"rows every 1 min over 1\.39 d"):
        align(pool_log(), pool_loop(period=period))


def test_logs_without_time_are_refused():
    nothing = Log(time=np.empty(0, dtype=np.int64), channels={k: np.empty(0) for k in ("level", "target", "gate")})
    with pytest.raises(LogError, match="no rows"):
        align(nothing, pool_loop())
    with pytest.raises(LogError, match="two different stamps"):
        align(replace(pool_log(), time=np.full(2000, START)), pool_loop())


def test_a_date_far_away_does_not_fill_the_memory():
    log = pool_log(rows=2000, period=1.0)
    time = log.time.copy()
    time[1000:] += 10**18  # half the rows 32 years later: no strays, and 10^9 instants
    with pytest.raises(LogError, match="instants for 2000 stamps"):
        align(replace(log, time=time), pool_loop(period=1.0))


def test_require_usable_refuses_short_and_lifeless_records():
    require_usable(align(pool_log(), pool_loop()))
    with pytest.raises(CannotAnswerError, match="150 of 150") as caught:
        require_usable(align(pool_log(rows=150), pool_loop()))
    assert caught.value.exit_code == 4
    still = with_channel(pool_log(), gate=np.full(2000, 40.0), level=np.full(2000, 2.0))
    with pytest.raises(CannotAnswerError) as caught:
        require_usable(align(still, pool_loop()))
    assert [p.where for p in caught.value.problems] == ["signals.actuator", "signals.measurement"]
    assert "bump" in caught.value.problems[0].do


def test_an_actuator_that_moves_in_manual_only_does_not_count_as_moving():
    cells = np.full(2000, "AUTO", dtype=object)
    cells[:500] = "MAN"
    gate = np.full(2000, 40.0)
    gate[:500] = pool_channels(500)["gate"]
    record = align(with_mode(pool_log(gate=gate), cells), pool_loop(mode=AUTOMATIC))
    assert "constant-actuator" in kinds(record)
    with pytest.raises(CannotAnswerError, match="actuator never moves"):
        require_usable(record)


def test_a_log_never_in_the_stated_mode_names_the_modes_it_holds():
    loop = pool_loop(mode=Mode(column="mode", automatic=("Auto",)))
    record = align(with_mode(pool_log(), np.array(["AUTO"] * 1500 + ["HAND"] * 500, dtype=object)), loop)
    with pytest.raises(CannotAnswerError) as caught:
        require_usable(record)
    (problem,) = caught.value.problems
    assert problem.where == "signals.mode.automatic"
    assert '"Auto" occurs (did you mean "AUTO"?)' in problem.found
    assert '"AUTO" (1500 rows), "HAND" (500 rows)' in problem.found
