"""Every finding has a case that fires, and a clean log fires none but the coverage."""

from __future__ import annotations

from collections.abc import Callable
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

from auditor.logs.align import align
from auditor.logs.findings import CHECKS
from auditor.logs.findings.base import Finding
from auditor.logs.findings.clock_step import clock_steps
from auditor.logs.findings.exception_reported import archive_deadband
from auditor.logs.findings.interpolated import on_lines
from auditor.logs.findings.quantised import quantum
from auditor.logs.findings.sentinel import sentinel_mask
from auditor.logs.findings.stuck import stuck_runs
from auditor.loop import Actuator, Exclusion, Signal

ROWS = 2000
MINUTE = 60 * NS


def spoiled(name: str, at, value) -> tuple:
    """Return the clean log with some values of a column replaced."""
    log = pool_log()
    values = log.channels[name].copy()
    values[at] = value
    return with_channel(log, **{name: values}), pool_loop()


def shifted(rows: slice, by: int) -> tuple:
    """Return the clean log with some stamps moved."""
    log = pool_log()
    time = log.time.copy()
    time[rows] += by
    return replace(log, time=time), pool_loop()


def send_on_delta(values: np.ndarray, delta: float) -> np.ndarray:
    """Return what an archive with a dead-band keeps, held."""
    kept = values.copy()
    for k in range(1, len(kept)):
        kept[k] = values[k] if abs(values[k] - kept[k - 1]) > delta else kept[k - 1]
    return kept


def with_manual_spell():
    cells = np.full(ROWS, "AUTO", dtype=object)
    cells[100:110], cells[400:420] = "MAN", "LOCAL"
    return with_mode(pool_log(), cells), pool_loop(mode=AUTOMATIC)


def with_exclusion():
    stretch = Exclusion(start=START + 100 * MINUTE, end=START + 109 * MINUTE, why="pump swap")
    return pool_log(), pool_loop(exclude=(stretch,))


def with_duplicates():
    return with_rows(pool_log(), np.insert(np.arange(ROWS), [51, 101], [50, 100])), pool_loop()


def with_interpolation():
    level = pool_channels(ROWS)["level"]
    knots = np.arange(0, ROWS, 10)
    return pool_log(level=np.interp(np.arange(ROWS), knots, level[knots])), pool_loop()


def with_drift():
    return replace(pool_log(), time=stamps_of(ROWS, 60.0 * (1 + 5e-4))), pool_loop()  # one period over the log


def with_jitter():
    scatter = np.random.default_rng(5).integers(-12 * NS, 12 * NS, ROWS)
    return replace(pool_log(), time=pool_log().time + scatter), pool_loop()


def with_sparse_setpoint():
    log = pool_log()
    target = log.channels["target"].copy()
    target[1:300] = np.nan
    return with_channel(log, target=target), pool_loop()


def saturated():
    gate = pool_channels(ROWS)["gate"]
    high = float(np.quantile(gate, 0.9))
    loop = pool_loop(actuator=Actuator(column="gate", low=0.0, high=high))
    return pool_log(gate=np.minimum(gate, high)), loop


def with_change(change: Callable[[np.ndarray], None]) -> tuple:
    """Return the clean log with its level changed in place."""
    level = pool_channels(ROWS)["level"]
    change(level)
    return pool_log(level=level), pool_loop()


def with_resets():
    return with_change(lambda level: level.__setitem__([300, 301, 302, 303, 800], 1.2))


def as_an_angle():
    return pool_log(level=(3.0 * np.arange(ROWS) + pool_channels(ROWS)["level"]) % 360.0), pool_loop()


def in_centimetres():
    return with_change(lambda level: level.__setitem__(slice(1100, None), 100 * level[1100:]))


def with_ramp():
    target = np.full(ROWS, 2.0)
    target[500:550] = 2.0 + 0.004 * np.arange(1, 51)
    target[550:] = 2.2
    return pool_log(target=target), pool_loop()


CASES: dict[str, tuple[Callable[[], tuple], dict]] = {
    "coverage": (lambda: (pool_log(), pool_loop()), {"count": ROWS, "start": START}),
    "stray-stamp": (lambda: shifted(slice(ROWS - 1, ROWS), 10**18), {"count": 1}),
    "backward-clock": (
        lambda: (with_rows(pool_log(), np.r_[0:500, 501, 500, 502:ROWS]), pool_loop()),
        {"count": 1, "start": START + 500 * MINUTE, "end": START + 501 * MINUTE},
    ),
    "duplicate": (with_duplicates, {"count": 2, "start": START + 50 * MINUTE, "end": START + 100 * MINUTE}),
    "clock-step": (lambda: shifted(slice(700, None), 20 * NS), {"count": 1, "start": START + 699 * MINUTE}),
    "clock-drift": (with_drift, {"count": ROWS}),
    "jitter": (with_jitter, {}),
    "coarse-log": (lambda: (pool_log(period=300.0), pool_loop()), {"count": ROWS, "weight": "limits the answer"}),
    "fine-log": (lambda: (pool_log(period=20.0), pool_loop()), {}),
    "mixed-period": (
        lambda: (with_rows(pool_log(), np.r_[0:1203, 1203:ROWS:3]), pool_loop()),
        {"count": 1, "start": START + 1203 * MINUTE, "weight": "limits the answer"},
    ),
    "gap": (
        lambda: (with_rows(pool_log(), np.r_[0:500, 510:800, 801:ROWS]), pool_loop()),
        {"count": 2, "start": START + 500 * MINUTE, "end": START + 800 * MINUTE},
    ),
    "bridged": (lambda: spoiled("level", [500, 501, 800], np.nan), {"count": 3}),
    "manual": (with_manual_spell, {"count": 30, "start": START + 100 * MINUTE, "end": START + 419 * MINUTE}),
    "excluded": (with_exclusion, {"count": 10, "start": START + 100 * MINUTE, "end": START + 109 * MINUTE}),
    "bad-value": (lambda: spoiled("gate", slice(200, 240), np.nan), {"count": 40, "signal": "gate"}),
    "on-change": (with_sparse_setpoint, {"count": 299, "signal": "target"}),
    "sentinel": (lambda: spoiled("level", [300, 900], -9999.0), {"count": 2, "signal": "level"}),
    "out-of-range": (
        lambda: (spoiled("level", [5, 6], 2.9)[0], pool_loop(measurement=Signal(column="level", low=0, high=2.8))),
        {"count": 2, "signal": "level", "start": START + 5 * MINUTE},
    ),
    "spike": (
        lambda: spoiled("level", [400, 900, 1500], [2.4, 1.7, 2.4]),
        {"count": 3, "start": START + 400 * MINUTE, "end": START + 1500 * MINUTE, "weight": "limits the answer"},
    ),
    "sensor-reset": (
        with_resets,
        {"count": 1, "start": START + 300 * MINUTE, "end": START + 303 * MINUTE, "signal": "level"},
    ),
    "range-wrap": (as_an_angle, {"count": 16, "start": START + 120 * MINUTE, "signal": "level"}),
    "unit-change": (in_centimetres, {"count": 1, "start": START + 1100 * MINUTE, "signal": "level"}),
    "stuck": (lambda: spoiled("level", slice(1000, 1100), 2.03), {"count": 1, "start": START + 1000 * MINUTE}),
    "stale-hold": (
        lambda: spoiled("level", slice(1000, 1008), 2.03),
        {"count": 1, "start": START + 1000 * MINUTE, "end": START + 1007 * MINUTE, "signal": "level"},
    ),
    "interpolated": (with_interpolation, {"signal": "level"}),
    "exception-reported": (
        lambda: (pool_log(level=send_on_delta(pool_channels(ROWS)["level"], 0.02)), pool_loop()),
        {"signal": "level"},
    ),
    "quantised": (
        lambda: (pool_log(level=np.round(pool_channels(ROWS)["level"], 2)), pool_loop()),
        {"signal": "level"},
    ),
    "setpoint-ramp": (
        with_ramp,
        {"count": 1, "start": START + 500 * MINUTE, "end": START + 549 * MINUTE, "signal": "target"},
    ),
    "saturation": (saturated, {"signal": "gate", "count": 200}),
    "constant-actuator": (lambda: spoiled("gate", slice(None), 40.0), {"count": ROWS, "weight": "stops the answer"}),
}


def findings_of(log, loop, kind: str) -> list[Finding]:
    return [finding for finding in align(log, loop).findings if finding.kind == kind]


def test_every_check_has_a_case():
    assert set(CASES) == set(CHECKS)


@pytest.mark.parametrize("kind", CASES)
def test_a_damaged_log_fires(kind):
    make, expected = CASES[kind]
    found = findings_of(*make(), kind)
    assert len(found) == 1, "one finding per kind and signal"
    for name, value in expected.items():
        assert getattr(found[0], name) == value, name
    assert found[0].detail
    assert found[0].effect
    assert found[0].weight in ("note", "limits the answer", "stops the answer")
    assert (found[0].start is None) == (found[0].end is None)


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("rows", [300, 5000])
def test_a_clean_log_fires_nothing_but_the_coverage(seed, rows):
    cells = np.full(rows, "AUTO", dtype=object)
    log = with_mode(pool_log(rows=rows, seed=seed), cells)
    loop = pool_loop(
        measurement=Signal(column="level", low=0.0, high=4.0),
        actuator=Actuator(column="gate", low=-500.0, high=500.0),
        mode=AUTOMATIC,
    )
    assert [f.kind for f in align(log, loop).findings] == ["coverage"]
    assert [f.kind for f in align(pool_log(rows=rows, seed=seed), pool_loop()).findings] == ["coverage"]


def test_what_reading_found_comes_first():
    note = Finding(kind="footer", start=None, end=None, count=1, detail="one line", effect="left out")
    assert align(replace(pool_log(), findings=(note,)), pool_loop()).findings[0] is note


# the clock


def test_a_hole_and_a_late_row_are_no_clock_step():
    late = shifted(slice(700, 701), 9 * NS)
    assert not findings_of(*late, "clock-step")
    assert not findings_of(with_rows(pool_log(), np.r_[0:500, 510:ROWS]), pool_loop(), "clock-step")


def test_clock_steps_say_where_and_how_large():
    scatter = np.random.default_rng(2).normal(0, 0.01, 1001)
    phase = np.repeat([0.0, 0.3, 0.1], [400, 300, 301]) + scatter
    at, size = clock_steps(np.diff(phase))
    np.testing.assert_array_equal(at, [399, 699])
    np.testing.assert_allclose(size, [0.3, -0.2], atol=0.02)  # medians of 20 rows of deviation 0.01: 0.003 each


def test_jitter_is_no_drift_and_a_drift_is_no_jitter():
    assert not findings_of(*with_jitter(), "clock-drift")
    assert not findings_of(*with_drift(), "jitter")


def test_rows_without_a_clock_are_said_to_have_none():
    stamps = START + np.sort(np.random.default_rng(0).integers(0, ROWS * MINUTE, ROWS))
    found = findings_of(replace(pool_log(), time=stamps), pool_loop(), "jitter")
    assert "follow no clock" in found[0].effect
    assert found[0].weight == "limits the answer"


def test_a_repeated_hour_is_recognised():
    log = pool_log()
    time = log.time.copy()
    time[1000:] -= 60 * MINUTE
    found = findings_of(replace(log, time=time), pool_loop(), "duplicate")
    assert {f.signal for f in found} >= {"level", "gate"}
    assert all("repeats an hour" in f.detail for f in found if f.signal in ("level", "gate"))
    assert next(f.count for f in found if f.signal == "level") == 60


# how values are stored


@settings(max_examples=60, deadline=None)
@given(
    seed=st.integers(0, 1000),
    step=st.sampled_from([0.01, 0.013, 0.05, 0.1, 0.25, 100 / 4095, 1e-3, 7.0, 1 / 3]),
    steps=st.floats(1.5, 400.0),
    level=st.sampled_from([0.0, 20.0, -3.0]),
    single=st.booleans(),
)
def test_the_step_of_stored_values_is_found(seed, step, steps, level, single):
    raw = np.random.default_rng(seed).normal(0, steps * step, 3000) + level * step * 10
    values = step * np.round(raw / step)
    if single:
        values = values.astype(np.float32).astype(np.float64)
    found = quantum(values)
    assert found == pytest.approx(step, rel=2e-4)  # shortened to what moves the lattice's end by 1/500 of a step
    reach = np.ptp(values) / step
    assert abs(found - step) * reach < 0.01 * step


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 10_000), rows=st.sampled_from([30, 300, 5000]), level=st.sampled_from([0.0, 1e3, -5.0]))
def test_values_of_full_resolution_have_no_step(seed, rows, level):
    values = np.random.default_rng(seed).normal(level, 1.0, rows)
    assert quantum(values) is None
    assert quantum(values.astype(np.float32).astype(np.float64)) is None, "single precision is no visible step"
    assert quantum(np.repeat(values, 3)) is None, "held values are not quantised ones"
    assert quantum(np.round(values, 6)) is None, "1e-6 of the deviation is not visible"


def test_a_step_needs_values_and_a_lattice():
    assert quantum(np.empty(0)) is None
    assert quantum(np.full(100, np.nan)) is None
    assert quantum(np.full(100, 3.0)) is None
    assert quantum(np.tile([0.0, 1.0], 50)) is None, "two levels are a switch"
    mixed = np.round(np.random.default_rng(0).normal(0, 1, 1000), 1)
    mixed[::20] += np.random.default_rng(1).uniform(0, 0.1, 50)
    assert quantum(mixed) is None, "one value in twenty between the steps"
    mixed[::20] = np.round(mixed[::20], 1)
    mixed[7] = 0.123456
    assert quantum(mixed) == 0.1, "one in a thousand is a stray"


def test_a_stated_step_is_respected_and_its_contradiction_told():
    loop = pool_loop(measurement=Signal(column="level", resolution=0.05))
    record = align(pool_log(), loop)
    assert record.y_quantum == 0.05
    assert "no visible step" in next(f.detail for f in record.findings if f.kind == "quantised")


def test_steps_of_measurement_and_actuator_reach_the_record():
    channels = pool_channels(ROWS)
    log = pool_log(level=np.round(channels["level"], 3), gate=0.5 * np.round(2 * channels["gate"]))
    record = align(log, pool_loop())
    assert (record.y_quantum, record.u_quantum, record.r_quantum) == (0.001, 0.5, None)


@pytest.mark.parametrize("parts", [0.3, 0.5, 1.0])
def test_the_dead_band_of_an_archive_is_found(parts):
    values = pool_channels(4000, seed=3)["level"]
    delta = parts * float(np.std(values))
    found = archive_deadband(send_on_delta(values, delta), None)
    assert found == pytest.approx(delta, rel=0.05)  # the smallest of some hundred overshoots


def test_a_dead_band_is_found_through_changes_stored_by_the_clock():
    values = pool_channels(6000, seed=4)["level"]
    delta, kept, since = 0.06, values.copy(), 0
    for k in range(1, len(kept)):
        since += 1
        stored = abs(values[k] - kept[k - 1]) > delta or since == 10
        kept[k] = values[k] if stored else kept[k - 1]
        since = 0 if stored else since
    assert archive_deadband(kept, None) == pytest.approx(delta, rel=0.05)


def test_no_dead_band_where_small_changes_are_there():
    values = pool_channels(4000)["level"]
    assert archive_deadband(values, None) is None
    assert archive_deadband(np.repeat(values, 5), None) is None, "a slow sensor"
    rounded = np.round(values, 2)
    assert archive_deadband(rounded, 0.01) is None, "rounding"
    assert archive_deadband(np.clip(values, 1.9, 2.1), None) is None, "saturation"
    assert archive_deadband(np.empty(0), None) is None


def test_the_last_digit_of_a_log_that_moves_far_is_no_dead_band():
    # Batches warmed from 20 to 85 degrees, stored to 0.001: the step is under 1e-4 of the deviation and not looked
    # for. A quarter of the values repeat, as a resting signal does, and no change is smaller than the last digit.
    rng = np.random.default_rng(6)
    warming = np.repeat(np.linspace(20.0, 85.0, 20), 200)
    resting = np.cumsum(rng.choice([-0.001, 0.0, 0.001], size=4000))
    values = np.round(warming + resting, 3)
    assert 1e-4 * float(np.std(values)) > 0.001
    assert archive_deadband(values, None) is None


def test_an_archive_that_leaves_rows_out_is_told_to_be_stated():
    channels = pool_channels(4000)
    kept = send_on_delta(channels["level"], 0.05)
    stored = np.flatnonzero(np.diff(kept, prepend=np.nan) != 0)
    level = np.full(4000, np.nan)
    level[stored] = kept[stored]
    log = pool_log(rows=4000, level=level)
    cut, held = align(log, pool_loop()), align(log, pool_loop(measurement=Signal(column="level", stored="on-change")))
    advice = [f.effect for f in cut.findings if f.kind == "exception-reported"]
    assert len(advice) == 1
    assert 'stored = "on-change"' in advice[0]
    np.testing.assert_array_equal(held.y, kept)
    assert held.valid.all()
    assert held.y_deadband == pytest.approx(0.05, rel=0.05)
    assert held.log_step == PERIOD


# values


def test_numbers_for_no_value_are_found_and_excursions_are_not():
    values = np.random.default_rng(0).normal(20.0, 0.5, 5000)
    values[[3, 70]] = -273.2
    values[[900, 901, 902]] = 850.0
    values[1500:1510] = np.linspace(20, 60, 10)  # an excursion: far, but not always the same
    values[2000] = 77.7  # far, alone, no customary number
    expected = [3, 70, 900, 901, 902]
    np.testing.assert_array_equal(np.flatnonzero(sentinel_mask(values, True)), expected)
    np.testing.assert_array_equal(np.flatnonzero(sentinel_mask(values, False)), [3, 70])
    values[[3, 70]] = np.float64(np.float32(-273.2))
    assert sentinel_mask(values, False)[[3, 70]].all(), "through single precision"
    held = np.repeat(np.random.default_rng(1).laplace(20.0, 0.02, 600), 6)
    held[1800:1806] = 21.0
    assert not sentinel_mask(held, True).any(), "one excursion of a signal that repeats every value"
    assert not sentinel_mask(np.where(np.arange(100) < 90, 0.0, 1.0), False).any(), "a switch that is mostly off"
    assert not sentinel_mask(np.full(50, np.nan), True).any()
    assert not sentinel_mask(np.random.default_rng(0).normal(999, 1, 1000).round(), True).any(), "a usual 999"


def test_sentinels_are_looked_for_before_scaling():
    log, _ = spoiled("level", [300, 900], -9999.0)
    record = align(log, pool_loop(measurement=Signal(column="level", scale=0.01, offset=1.0)))
    assert next(f.count for f in record.findings if f.kind == "sentinel") == 2
    assert record.y[300] == record.y[299]


def test_an_actuator_outside_its_limits_is_kept_and_told():
    log = pool_log()
    record = align(log, pool_loop(actuator=Actuator(column="gate", low=0.0, high=51.0)))
    np.testing.assert_array_equal(record.u, log.channels["gate"])
    found = next(f for f in record.findings if f.kind == "out-of-range")
    assert found.count == np.sum(log.channels["gate"] > 51.0)
    assert "check them" in found.effect


def test_a_limit_nobody_stated_is_seen():
    gate = pool_channels(ROWS)["gate"]
    high = float(np.quantile(gate, 0.95))
    found = findings_of(pool_log(gate=np.minimum(gate, high)), pool_loop(), "saturation")
    assert [f.count for f in found] == [100]
    assert "state high" in found[0].effect


def test_stuck_is_judged_by_the_signal_itself():
    fine = np.random.default_rng(0).normal(0, 1, 3000)
    fine[500:560] = fine[500]
    assert [a.tolist() for a in stuck_runs(fine)] == [[500], [559]]
    coarse = np.repeat(np.round(fine[:300]), 20)
    assert len(stuck_runs(coarse)[0]) == 0, "runs of 20 and more are usual for it"
    dead = np.concatenate((fine, np.full(400, 1.0)))
    assert stuck_runs(dead)[1].tolist()[-1] == len(dead) - 1
    assert len(stuck_runs(np.full(10, 1.0))[0]) == 0
    assert stuck_runs(np.full(100, 1.0))[0].tolist() == [0]


def test_resting_at_an_end_again_and_again_is_not_stuck():
    days = np.concatenate([np.r_[np.zeros(50), 1 + np.random.default_rng(k).uniform(0, 1, 50)] for k in range(10)])
    assert len(stuck_runs(days)[0]) == 0, "nought every night"
    days[260:290] = 1.5
    assert stuck_runs(days)[0].tolist() == [260]


def test_a_measurement_that_never_moves_stops_the_answer():
    found = findings_of(*spoiled("level", slice(None), 2.0), "stuck")
    assert found[0].weight == "stops the answer"


def test_points_on_lines():
    generator = np.random.default_rng(0)
    knots = generator.normal(0, 1, 100).cumsum()
    values = np.interp(np.arange(991) / 10, np.arange(100), knots)
    line = on_lines(values, None)
    between = np.arange(991) % 10 != 0
    assert line[between].mean() > 0.99
    assert line[~between].mean() < 0.05
    assert not on_lines(generator.normal(0, 1, 1000), None).any()
    assert not on_lines(np.round(np.sin(np.arange(1000) / 300), 2), 0.01).any(), "single steps of a rounded signal"
    assert not on_lines(np.exp(-np.arange(3000) / 50.0), None).any(), "a settling that nothing disturbs"
    assert not on_lines(np.full(10, np.nan), None).any()


def test_a_stated_interpolation_is_believed():
    loop = pool_loop(measurement=Signal(column="level", stored="interpolated"))
    found = findings_of(pool_log(), loop, "interpolated")
    assert "the loop file says" in found[0].detail


def test_modes_and_reasons_are_named():
    manual = findings_of(*with_manual_spell(), "manual")[0]
    assert '"LOCAL" (20 rows), "MAN" (10 rows)' in manual.detail
    assert "pump swap" in findings_of(*with_exclusion(), "excluded")[0].detail


def test_an_actuator_with_few_numbers_is_told_to_be_stated():
    gate = pool_channels(ROWS)["gate"]
    gate[np.arange(ROWS) % 4 != 0] = np.nan
    found = findings_of(pool_log(gate=gate), pool_loop(), "on-change")
    assert [(f.signal, f.weight) for f in found] == [("gate", "limits the answer")]
    assert 'stored = "on-change"' in found[0].effect
