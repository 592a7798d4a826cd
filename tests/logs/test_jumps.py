"""Findings of values that jump, stand, wrap or change their unit: where they must not fire, and what they say."""

from __future__ import annotations

import numpy as np
import pytest
from logs_in_memory import NS, pool_channels, pool_log, pool_loop, with_rows

from auditor.logs.align import align
from auditor.logs.findings.base import Finding
from auditor.logs.findings.jumps import excursions
from auditor.logs.findings.mixed_period import spacing_changes
from auditor.logs.findings.series import usual_change
from auditor.logs.findings.setpoint_ramp import ramps
from auditor.logs.findings.stale_hold import stale_runs
from auditor.logs.findings.unit_change import unit_changes
from auditor.loop import Signal

ROWS = 2000
JUMPS = {"spike", "sensor-reset", "range-wrap", "unit-change", "stale-hold"}


def found(log, loop=None) -> dict[str, Finding]:
    """Return the findings of this page by kind."""
    return {f.kind: f for f in align(log, loop or pool_loop()).findings if f.kind in JUMPS}


def level(**more) -> np.ndarray:
    return pool_channels(ROWS, **more)["level"]


def follow(values: np.ndarray) -> np.ndarray:
    return np.ones(len(values) - 1, dtype=bool)


# jumps away and back


@pytest.mark.parametrize("seed", range(10))
@pytest.mark.parametrize("tail", [8, 30])
def test_heavy_noise_is_no_row_of_spikes(seed, tail):
    # Student's t; with 8 degrees of freedom one draw in a million is 14 off, which is what ten usual changes are.
    noise = np.random.default_rng(seed).standard_t(tail, ROWS)
    assert len(excursions(noise, follow(noise), None).first) == 0


def test_a_pulse_that_is_usual_is_no_spike():
    values = level()
    values[::40] += 0.3
    assert "spike" not in found(pool_log(level=values)), "one value in forty"


def test_a_step_and_a_disturbance_are_no_excursion():
    values = level()
    values[700:] += 0.5
    values[1200:1260] += 0.4 * np.exp(-np.arange(60) / 10)
    assert not found(pool_log(level=values))


def test_a_jump_over_a_hole_is_no_spike():
    values = level()
    values[500] += 0.4
    log = with_rows(pool_log(level=values), np.delete(np.arange(ROWS), np.r_[480:500, 501:520]))
    assert not found(log)


def test_a_spike_in_a_rounded_signal_is_measured_in_its_steps():
    values = np.round(level(), 2)
    assert usual_change(values, 0.01) >= 0.01
    values[300] += 0.05
    assert not found(pool_log(level=values)), "five steps of 0.01"
    values[300] += 0.25
    assert found(pool_log(level=values))["spike"].count == 1


def test_a_few_spikes_are_told_by_their_largest():
    values = level()
    values[[100, 700]] += (0.2, -0.6)
    spike = found(pool_log(level=values))["spike"]
    assert spike.count == 2
    assert "2025-03-01T11:40:00Z" in spike.detail
    assert spike.effect.startswith("none, kept as recorded")


def test_the_same_value_three_times_is_a_reset_and_two_others_are_spikes():
    values = level()
    values[[200, 600, 1000]] = 1.25
    values[[300, 1300]] += 0.4
    told = found(pool_log(level=values))
    assert (told["sensor-reset"].count, told["spike"].count) == (3, 2)
    assert "to 1.25 m" in told["sensor-reset"].detail


def test_spikes_are_judged_by_the_stretch_they_are_in():
    values = level()
    values[1500:] = 2 + 40 * (values[1500:] - 2)
    assert "spike" not in found(pool_log(level=values)), "a restless quarter of the log"


# over the end of the range


def test_a_square_wave_does_not_wrap():
    swing = np.where(np.arange(ROWS) // 100 % 2, 0.0, 300.0) + level()
    assert "range-wrap" not in found(pool_log(level=swing)), "no customary range"


def test_an_angle_around_north_wraps_both_ways_and_has_no_spikes():
    angle = (1000 * (level() - 2.0)) % 360.0
    told = found(pool_log(level=angle))
    assert set(told) == {"range-wrap"}
    assert "range of 360" in told["range-wrap"].detail
    centred = (angle + 180.0) % 360.0 - 180.0
    assert not found(pool_log(level=centred)), "the same angle counted from the south does not wrap"


def test_a_counter_and_a_stated_range_wrap():
    count = (0.7 * np.arange(ROWS) + 0.01 * level()) % 100.0
    assert "range-wrap" in found(pool_log(level=count)), "fourteen falls of a hundred and no rise"
    wandering = (20 * (level() - 2.0)) % 5.0
    assert "range-wrap" not in found(pool_log(level=wandering)), "five is no customary range"
    loop = pool_loop(measurement=Signal(column="level", low=0.0, high=5.0))
    assert "range of 5 and" in found(pool_log(level=wandering), loop)["range-wrap"].detail


def test_a_switch_does_not_wrap():
    assert "range-wrap" not in found(pool_log(level=np.where(np.arange(ROWS) % 37 < 9, 0.0, 360.0)))


# another unit


@pytest.mark.parametrize("factor", [100.0, 0.01, 3.2808, 0.3048, 2.0])
def test_a_change_of_unit_says_its_factor(factor):
    values = level()
    values[901:] *= factor
    change = found(pool_log(level=values))["unit-change"]
    assert change.count == 1
    told = float(change.detail.split("× ")[1].replace("\u202f", ""))
    assert told == pytest.approx(factor, rel=0.05)  # medians of 300 values, whose target moves by 2.5 %


def test_fahrenheit_and_back():
    celsius = 60 + 5 * (level() - 2.0)
    celsius[700:1300] = 1.8 * celsius[700:1300] + 32
    change = found(pool_log(level=celsius, target=np.full(ROWS, 60.0)))["unit-change"]
    assert change.count == 2
    assert change.detail.endswith("× 1.80 + 32")


def test_a_level_that_moves_is_no_unit():
    values = level()
    values[900:] += 2.0
    assert not found(pool_log(level=values)), "twice the level, the same scatter"
    louder = level()
    louder[900:] = 2 + 3 * (louder[900:] - 2)
    assert not found(pool_log(level=louder)), "three times the scatter, the same level"


def test_a_flow_whose_setpoint_is_doubled_keeps_its_unit():
    twice = np.where(np.arange(ROWS) < 900, 1.0, 2.0)
    noise = 1 + 0.01 * np.random.default_rng(1).normal(0, 1, ROWS)
    assert not found(pool_log(level=twice * noise, target=twice))
    assert "unit-change" in found(pool_log(level=twice * noise, target=np.ones(ROWS)))


def test_an_actuator_changes_its_unit_too():
    gate = pool_channels(ROWS)["gate"]
    gate[1000:] /= 100
    told = found(pool_log(gate=gate))["unit-change"]
    assert (told.signal, told.count) == ("gate", 1)
    assert unit_changes(gate[:150], np.array([70])) == [], "too few values on one side"


# old values repeated


def test_four_equal_values_are_stale_three_are_not():
    values = level()
    values[500:503] = values[500]
    assert len(stale_runs(values)[0]) == 0
    values[500:504] = values[500]
    assert [a.tolist() for a in stale_runs(values)] == [[500], [503]]
    assert len(stale_runs(values[:40])[0]) == 0, "forty values tell nothing"


@pytest.mark.parametrize("seed", range(10))
@pytest.mark.parametrize("step", [0.005, 0.02, 0.05])
def test_a_rounded_signal_is_not_stale(seed, step):
    assert not found(pool_log(level=step * np.round(level(seed=seed) / step)))


def test_an_actuator_that_stands_as_well_is_no_stale_measurement():
    channels = pool_channels(ROWS)
    channels["level"][500:510] = channels["level"][500]
    assert "stale-hold" in found(pool_log(level=channels["level"]))
    channels["gate"][500:510] = channels["gate"][500]
    assert not found(pool_log(level=channels["level"], gate=channels["gate"])), "the whole plant stood"


def test_slow_sensors_and_stated_changes_are_not_stale():
    assert not found(pool_log(level=np.repeat(level()[:400], 5)))
    held = level()
    held[500:510] = held[500]
    loop = pool_loop(measurement=Signal(column="level", stored="on-change"))
    assert "stale-hold" not in found(pool_log(level=held), loop)


# spacing and setpoint


def test_changes_of_spacing_are_put_where_they_are():
    spacing = np.repeat([60.0, 180.0, 60.0], [703, 211, 400])
    spacing[[50, 300, 1200]] = 3600.0
    stamps = np.concatenate(([0], np.cumsum(spacing * NS))).astype(np.int64)
    at, steps = spacing_changes(stamps)
    np.testing.assert_array_equal(at, [703, 914])
    np.testing.assert_array_equal(steps, [60.0, 180.0, 60.0])


def test_missing_rows_jitter_and_no_clock_are_no_change_of_spacing():
    rng = np.random.default_rng(3)
    kept = np.sort(rng.choice(ROWS, 1600, replace=False)) * (60 * NS)
    assert len(spacing_changes(kept)[0]) == 0
    assert len(spacing_changes(np.sort(rng.integers(0, 10**14, ROWS)))[0]) == 0
    assert len(spacing_changes(np.arange(5) * NS)[1]) == 0


def test_ramps_are_told_from_steps_and_wandering():
    target = np.repeat([2.0, 2.1, 2.3, 2.2], 100).astype(float)
    assert len(ramps(target)[0]) == 0
    target[150:170] = np.linspace(2.1, 2.3, 21)[1:]
    target[170:200] = 2.3
    assert [a.tolist() for a in ramps(target)] == [[150], [169]]
    coarse = np.round(np.linspace(0, 1, 301), 2)
    assert [a.tolist() for a in ramps(coarse, 0.01)] == [[2], [299]]
    assert len(ramps(np.repeat(np.arange(30.0), 50))[0]) == 0, "a curve in steps"
    assert len(ramps(np.random.default_rng(0).normal(0, 1, ROWS))[0]) == 0, "the output of another controller"


def test_a_coarse_actuator_limits_the_answer_and_says_to_what():
    gate = pool_channels(ROWS)["gate"]
    log = pool_log(gate=2 * np.round(gate / 2))
    rounded = next(f for f in align(log, pool_loop()).findings if f.kind == "quantised")
    assert "returns to 1 % (half a step) at best" in rounded.effect
    assert rounded.weight == "limits the answer"
