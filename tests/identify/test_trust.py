"""Each thing that stands against a model lowers the trust and says so; the worst of them decides."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from simulated_loop import PERIOD, first_order, record_of

from auditor.controllers.pid import Pid
from auditor.identify.thresholds import EXPLAINED_SHARE, NULL_GOOD, NULL_LIMIT
from auditor.identify.trust import PEAK, QUICK_PLANT_DELAY, SHORT_LOG, UNDERDAMPED, Evidence, judge
from auditor.logs.record import Record, Span

PI = Pid(gain=5.0, integral_time=1200.0)
SLOW = first_order(delay=QUICK_PLANT_DELAY + 1)
SWINGING = replace(SLOW, structure="oscillatory", damping=UNDERDAMPED / 2)
TWO_LAGS = replace(SLOW, time_constants_s=(1200.0, 300.0))


def flat(samples: int) -> Record:
    level = np.full(samples, 2.0)
    return record_of(level, level, level, PI)


SOUND = Evidence(
    record=flat(SHORT_LOG),
    controller=PI,
    plants=(SLOW, SLOW, SLOW, SLOW),
    best=0,
    null_replay=NULL_GOOD,
    explained_by_error=0.0,
    causes=(),
    peak_sensitivity=PEAK[0],
    pure_regulation=True,
    dropped=0,
)


def test_nothing_against_the_model_is_good() -> None:
    trust, (reason,) = judge(SOUND)
    assert trust == "good"
    assert "returns the record" in reason


@pytest.mark.parametrize(
    ("null", "explained", "trust"),
    [
        (1.01 * NULL_GOOD, 0.0, "limited"),
        (0.99 * NULL_LIMIT, 0.0, "limited"),
        (NULL_LIMIT, 0.99 * EXPLAINED_SHARE, "none"),
        (NULL_LIMIT, EXPLAINED_SHARE, "limited"),
    ],
)
def test_a_clock_that_does_not_come_back(null: float, explained: float, trust: str) -> None:
    seen = replace(SOUND, null_replay=null, explained_by_error=explained, causes=("the gates were swapped",))
    told, (reason,) = judge(seen)
    assert told == trust
    assert f"{100 * null:.1f} %" in reason
    assert "the gates were swapped." in reason


def test_only_samples_inside_spans_count_as_usable() -> None:
    record = replace(flat(2 * SHORT_LOG), spans=(Span(0, 100), Span(200, SHORT_LOG)))
    trust, (reason,) = judge(replace(SOUND, record=record))
    assert trust == "limited"
    assert f"{SHORT_LOG - 100:,} usable" in reason


def test_a_swinging_plant_needs_a_setpoint_move() -> None:
    half = replace(SOUND, plants=(SLOW, SLOW, SWINGING, SWINGING))
    trust, (reason,) = judge(half)
    assert trust == "none"
    assert "50 %" in reason
    assert "setpoint step" in reason
    assert judge(replace(half, pure_regulation=False))[0] == "limited"
    assert judge(replace(half, plants=(SLOW, SLOW, SLOW, SWINGING)))[0] == "good"


def test_derivative_action_on_two_lags() -> None:
    derivative = replace(SOUND, controller=replace(PI, derivative_time=60.0))
    assert judge(derivative)[0] == "good"
    trust, (reason,) = judge(replace(derivative, plants=(SLOW, SLOW, TWO_LAGS, TWO_LAGS)))
    assert trust == "limited"
    assert "Derivative" in reason


def test_a_quick_single_lag_in_pure_regulation() -> None:
    quick = replace(SLOW, delay_s=QUICK_PLANT_DELAY * PERIOD)
    seen = replace(SOUND, plants=(SLOW, quick), best=1)
    trust, (reason,) = judge(seen)
    assert trust == "limited"
    assert "single-lag" in reason
    assert judge(replace(seen, best=0))[0] == "good"
    assert judge(replace(seen, pure_regulation=False))[0] == "good"


@pytest.mark.parametrize("peak", [0.99 * PEAK[0], 1.01 * PEAK[1]])
def test_a_peak_sensitivity_nobody_runs(peak: float) -> None:
    trust, (reason,) = judge(replace(SOUND, peak_sensitivity=peak))
    assert trust == "limited"
    assert "peak sensitivity" in reason


def test_half_of_the_plants_dropped() -> None:
    assert judge(replace(SOUND, dropped=3))[0] == "good"
    trust, (reason,) = judge(replace(SOUND, dropped=4))
    assert trust == "limited"
    assert "4 of 8" in reason


def test_the_worst_decides_and_every_reason_is_told() -> None:
    trust, reasons = judge(replace(SOUND, record=flat(100), null_replay=NULL_LIMIT, dropped=4))
    assert trust == "none"
    assert len(reasons) == 3
