"""What a log cannot carry is refused, just below the bound and not at it."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from auditor.controllers.pid import Pid
from auditor.identify.plant import Load, Plant
from auditor.logs.record import Record, Span
from auditor.replay.bench import Bench, make_bench
from auditor.replay.refusals import DEADBANDS, GOOD_WIDTH, LOG_STEPS, QUANTA, WIDEST, refusal, trust_of_width
from auditor.replay.types import Setting

PERIOD, SAMPLES, DRAWS = 60.0, 10, 4
PLANT = Plant(
    A=np.array([[0.9]]), B0=np.array([0.1]), B1=np.zeros(1), C=np.ones(1), delay=0, structure="lags", delay_s=0.0,
    gain=1.0, gain_per_s=None, time_constants_s=(600.0,), load=Load(entry="input", phi=0.9, walk=0.0, noise=0.0),
)  # fmt: skip
RECORD = Record(
    period=PERIOD, start=0, y=np.zeros(SAMPLES), r=np.zeros(SAMPLES), u=np.zeros(SAMPLES), w=np.zeros((0, SAMPLES)),
    valid=np.ones(SAMPLES, dtype=np.bool_), spans=(Span(0, SAMPLES),), log_step=PERIOD,
)  # fmt: skip
LANES = {name: np.full(DRAWS + 1, 100.0) for name in ("updates", "rms_error", "updates_per_hour")}
NARROW = {"updates": (99.0, 101.0), "rms_error": (99.0, 101.0)}
STABLE = np.zeros(DRAWS, dtype=np.bool_)
DELTA = Setting(rule="send-on-delta", values={"delta": 0.3})


def bench(**changes: float) -> Bench:
    return make_bench(replace(RECORD, **changes), Pid(gain=1.0), (PLANT,) * DRAWS, 0, 600.0)


def test_nothing_stands_against_the_answer() -> None:
    assert refusal(DELTA, bench(), LANES, NARROW, STABLE) is None


def test_half_of_the_plants_run_away() -> None:
    assert refusal(DELTA, bench(), LANES, NARROW, np.arange(DRAWS) < 1) is None
    reason = refusal(DELTA, bench(), LANES, NARROW, np.arange(DRAWS) < 2)
    assert reason is not None
    assert "50 % of the likely plants" in reason


@pytest.mark.parametrize(
    ("stored", "times", "words"),
    [("y_quantum", QUANTA, "steps of the stored measurement"), ("y_deadband", DEADBANDS, "dead-bands of the archive")],
)
def test_thresholds_under_the_resolution_of_the_log(stored: str, times: float, words: str) -> None:
    coarse = bench(**{stored: 0.1})
    at, below = (replace(DELTA, values={"delta": share * times * 0.1}) for share in (1.0, 0.99))
    assert refusal(at, coarse, LANES, NARROW, STABLE) is None
    reason = refusal(below, coarse, LANES, NARROW, STABLE)
    assert reason is not None
    assert words in reason


def test_the_resolution_of_the_measurement_does_not_bind_other_thresholds() -> None:
    coarse = bench(y_quantum=1.0)
    command = replace(DELTA, link="actuator")
    off = Setting(rule="error-area", values={"area": 50.0, "delta": math.inf})
    clock = Setting(rule="periodic", values={"every": 5.0})
    assert [refusal(s, coarse, LANES, NARROW, STABLE) for s in (command, off, clock)] == [None] * 3


@pytest.mark.parametrize(("rows_apart", "answered"), [(LOG_STEPS, True), (0.99 * LOG_STEPS, False)])
def test_updates_closer_than_the_rows_of_a_coarse_log(rows_apart: float, answered: bool) -> None:
    log_step = 10 * PERIOD
    per_hour = 3600.0 / (rows_apart * log_step)
    lanes = {**LANES, "updates_per_hour": np.full(DRAWS + 1, per_hour)}
    reason = refusal(DELTA, bench(log_step=log_step), lanes, NARROW, STABLE)
    assert (reason is None) == answered
    assert answered or "every 10 min" in str(reason)
    assert refusal(DELTA, bench(), lanes, NARROW, STABLE) is None


@pytest.mark.parametrize("name", ["updates", "rms_error"])
def test_the_wider_interval_decides(name: str) -> None:
    def widened(width: float) -> dict[str, tuple[float, float]]:
        return {**NARROW, name: (100.0 - 50 * width, 100.0 + 50 * width)}

    # A hundredth off the bounds: the widths themselves are rounded.
    assert trust_of_width(LANES, widened(0.99 * GOOD_WIDTH), DRAWS) == "good"
    assert trust_of_width(LANES, widened(1.01 * GOOD_WIDTH), DRAWS) == "limited"
    assert refusal(DELTA, bench(), LANES, widened(0.99 * WIDEST), STABLE) is None
    reason = refusal(DELTA, bench(), LANES, widened(1.01 * WIDEST), STABLE)
    assert reason is not None
    assert "the likely plants disagree" in reason


def test_an_interval_without_a_middle_or_an_end_is_no_answer() -> None:
    nothing = {**LANES, "updates": np.zeros(DRAWS + 1)}
    assert refusal(DELTA, bench(), nothing, {**NARROW, "updates": (0.0, 0.0)}, STABLE) is not None
    assert refusal(DELTA, bench(), LANES, {**NARROW, "rms_error": (99.0, math.inf)}, STABLE) is not None


def test_the_lanes_behind_the_likely_plants_do_not_count() -> None:
    lanes = {name: np.where(np.arange(9) < DRAWS, 100.0, 1.0) for name in LANES}
    assert trust_of_width(lanes, NARROW, DRAWS) == "good"
