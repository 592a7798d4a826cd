"""Each damage is named by its own words."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from simulated_loop import first_order, late, record_of, rounded, simulate

from auditor.controllers.pid import Pid
from auditor.identify.causes import likely_causes
from auditor.identify.residual import null_replay
from auditor.identify.thresholds import NULL_GOOD
from auditor.logs.record import Record, Span

PLANT = first_order()
PI = Pid(gain=5.0, integral_time=1200.0)
LIMITED = replace(PI, low=48.5, high=51.0)


def causes(record: Record, controller: Pid) -> tuple[str, ...]:
    null = null_replay(record, controller, PLANT)
    assert null > NULL_GOOD
    return likely_causes(record, controller, PLANT, null)


def test_a_record_that_comes_back_has_no_causes() -> None:
    record = simulate(PI)
    assert likely_causes(record, PI, PLANT, null_replay(record, PI, PLANT)) == ()


@pytest.mark.parametrize(("skew", "words"), [(1, "1 sample late"), (-1, "1 sample early"), (2, "2 samples late")])
def test_skew_is_named_alone(skew: int, words: str) -> None:
    (cause,) = causes(late(simulate(PI), skew), PI)
    assert words in cause


@pytest.mark.parametrize(("low", "high"), [(40.0, 60.0), (49.0, 50.5)])
def test_wrong_limits_are_named_with_the_right_ones(low: float, high: float) -> None:
    record = replace(simulate(LIMITED, load=1.5), low=low, high=high)
    (cause,) = causes(record, replace(PI, low=low, high=high))
    assert "limits" in cause
    assert "48.5 and 51.0" in cause


def test_a_wrong_integral_form_is_named() -> None:
    true = Pid(gain=2.0, integral_time=200.0, integral="forward")
    (cause,) = causes(simulate(true), replace(true, integral="backward"))
    assert "'forward'" in cause


def test_wrong_gains_are_named_with_the_right_ones() -> None:
    (cause,) = causes(simulate(PI), replace(PI, gain=6.25))
    assert "gain 5.00" in cause
    assert "20 min" in cause


def test_coarse_rounding_is_named() -> None:
    assert any("rounded to 3" in cause for cause in causes(rounded(simulate(PI), 3.0), PI))


def test_a_compressed_actuator_is_named() -> None:
    record = simulate(PI)
    u = record.u.copy()
    for k in range(1, len(u)):
        u[k] = u[k] if abs(u[k] - u[k - 1]) > 0.5 else u[k - 1]
    assert any("compressed" in cause for cause in causes(replace(record, u=u), PI))


def test_manual_operation_is_named() -> None:
    record = simulate(PI)
    u = record.u.copy()
    u[2000:2300] = u[2000]
    assert any("manual operation" in cause and "4.98 h" in cause for cause in causes(replace(record, u=u), PI))


def test_retuning_in_mid_log_is_named() -> None:
    before, after = simulate(PI, n=3000), simulate(Pid(gain=3.0, integral_time=900.0), n=3000, seed=2)
    y, r, u = (np.concatenate([getattr(before, name), getattr(after, name)]) for name in ("y", "r", "u"))
    record = replace(record_of(y, r, u, PI), spans=(Span(0, 3000), Span(3000, 6000)))
    assert any("retuned" in cause for cause in causes(record, PI))


def test_feedforward_is_named() -> None:
    assert any("feedforward" in cause for cause in causes(simulate(PI, feedforward=-0.5), PI))


def test_an_unknown_cause_is_said_to_be_unknown() -> None:
    record = simulate(PI)
    rng = np.random.default_rng(3)
    bumps = np.cumsum(np.where(rng.random(len(record)) < 0.01, rng.choice([-1.0, 1.0], len(record)), 0.0))
    (cause,) = causes(replace(record, u=record.u + bumps), PI)
    assert cause.startswith("nothing that was tested")
