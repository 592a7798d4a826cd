"""Measures against straightforward numpy, and intervals by hand."""

from __future__ import annotations

import numpy as np
import pytest

from auditor.controllers.pid import Pid
from auditor.logs.record import Record, Span
from auditor.loop import Limits
from auditor.replay.measuring import answer_interval, interval, log_floor, middle, per_lane, totals


def record(n: int, r: np.ndarray, period: float = 60.0, **more: object) -> Record:
    return Record(
        period=period, start=0, y=np.zeros(n), r=r, u=np.zeros(n), w=np.zeros((0, n)), valid=np.ones(n, dtype=bool),
        spans=(Span(0, n),), **more,
    )  # fmt: skip


def test_measures_equal_numpy_on_random_lanes() -> None:
    rng = np.random.default_rng(5)
    n, lanes = 500, 3
    y, u = rng.normal(size=(n, lanes)), np.clip(rng.normal(size=(n, lanes)), -1, 1)
    updated = (rng.random((n, lanes)) < 0.2).astype(np.uint8)
    r = rng.normal(size=n)
    spans = (Span(10, 200), Span(250, 480))
    limits = Limits(low=-1.5, high=1.2, band=0.8)
    rec = record(n, r)
    found = per_lane(totals(y, u, updated, rec, Pid(gain=1.0, low=-1.0, high=1.0), limits, spans), rec, limits)
    inside = np.r_[10:200, 250:480]
    for lane in range(lanes):
        e = r[inside] - y[inside, lane]
        gaps = np.concatenate([np.diff(np.flatnonzero(updated[s.start : s.stop, lane])) for s in spans]) * 60.0
        expected = {
            "updates": updated[inside, lane].sum(),
            "saved_fraction": 1 - updated[inside, lane].mean(),
            "rms_error": np.sqrt(np.mean(e**2)),
            "iae_per_hour": np.sum(np.abs(e)) * 60 / (len(inside) / 60),
            "max_abs_error": np.abs(e).max(),
            "outside_band_s": 60 * np.sum(np.abs(e) > 0.8),
            "outside_limits_s": 60 * np.sum((y[inside, lane] < -1.5) | (y[inside, lane] > 1.2)),
            "min_gap_s": gaps.min(),
            "median_gap_s": np.median(gaps),
            "max_gap_s": gaps.max(),
            "actuator_travel": sum(np.abs(np.diff(u[s.start : s.stop, lane])).sum() for s in spans),
            "saturated_s": 60 * np.sum(np.abs(u[inside, lane]) >= 1.0),
            "hours": len(inside) / 60,
        }
        for name, value in expected.items():
            # Sums over 420 samples in another order: rounding of a few 1e-16 per term.
            assert found[name][lane] == pytest.approx(value, rel=1e-12), name


def test_busiest_hour_is_the_largest_count_in_any_sixty_minutes() -> None:
    n = 400
    updated = np.zeros((n, 1), dtype=np.uint8)
    updated[[0, 100, 120, 159, 160, 161, 300], 0] = 1
    zeros = np.zeros((n, 1))
    rec = record(n, np.zeros(n))
    found = per_lane(totals(zeros, zeros, updated, rec, Pid(gain=1.0), Limits(), (Span(0, n),)), rec, Limits())
    # 60 samples of one minute: 100…159 holds three, 102…161 holds 120, 159, 160, 161.
    assert found["peak_updates_per_hour"][0] == 4


def test_a_gap_that_leaves_the_counted_stretch_is_no_gap() -> None:
    updated = np.zeros((100, 1), dtype=np.uint8)
    updated[[5, 60], 0] = 1
    zeros = np.zeros((100, 1))
    rec = record(100, np.zeros(100))
    spans = (Span(0, 50), Span(50, 100))
    found = middle(per_lane(totals(zeros, zeros, updated, rec, Pid(gain=1.0), Limits(), spans), rec, Limits()), 1)
    assert found.max_gap_s is None
    assert found.outside_band_s is None


def test_interval_is_five_to_ninety_five_percent_widened() -> None:
    # 24 draws 1…24 at (i − ½)/24: 5 % lies at 1.7, 95 % at 23.3, the median at 12.5; width 21.6, a quarter is 5.4,
    # capped at 5 % of 12.5 = 0.625; rounding adds 0.2 % of 12.5 = 0.025.
    low, high = interval(np.arange(1.0, 25.0))
    assert (low, high) == pytest.approx((1.7 - 0.65, 23.3 + 0.65))


def test_interval_knows_draws_that_ran_away() -> None:
    low, high = interval(np.array([1.0] * 20 + [np.nan] * 4))
    assert not np.isfinite(high)
    assert np.isfinite(low)


def test_chaos_of_the_event_loop_widens_the_interval() -> None:
    draws = np.full(24, 100.0)
    calm = answer_interval(np.r_[draws, 90.0, np.full(8, 100.0)], 24, 0.0)
    wild = answer_interval(np.r_[draws, 90.0, np.linspace(95.0, 105.0, 8)], 24, 0.0)
    assert calm == pytest.approx((99.8, 100.2))
    assert wild == pytest.approx((94.8, 105.2))


def test_coarse_measurement_asks_for_a_wider_interval() -> None:
    y = np.random.default_rng(0).normal(size=2000)
    fine = Record(
        period=1.0, start=0, y=y, r=np.zeros(2000), u=y, w=np.zeros((0, 2000)), valid=np.ones(2000, dtype=bool),
        spans=(Span(0, 2000),),
    )  # fmt: skip
    assert log_floor(fine) == {"updates": 0.0, "error": 0.0}
    from dataclasses import replace

    coarse = log_floor(replace(fine, y_quantum=0.2 * fine.error_deviation))
    assert coarse == pytest.approx({"updates": 0.006, "error": 0.008})
