"""`growth`: the replay drifts away by more than the likely plants agree on."""

from __future__ import annotations

import numpy as np
import pytest

from auditor.dangers import growth
from auditor.logs.record import Span
from tests.dangers.cases import LANES, SAMPLES, SETTLING, Bench, plain_record, where

ALLOWANCE = 3 * plain_record().error_deviation  # 0.042 m is below the band of 0.05 m


def drifting(shape: np.ndarray) -> Bench:
    """Lanes that leave the record by −1…1 times `shape` from sample 100 on."""
    bench = Bench()
    bench.y[100 : 100 + len(shape)] += shape[:, None] * np.linspace(-1.0, 1.0, LANES)
    return bench


def test_plants_that_part_and_are_not_pulled_together_are_flagged() -> None:
    # The middle nine tenths of 20 lanes (18 of them) differ by 2 · 17/19 of the shape.
    width = 2 * 17 / 19
    bench = drifting(0.004 * np.arange(100))
    first = 100 + int(np.ceil(0.05 / width / 0.004))
    flag = bench.only_flag(growth)
    assert ALLOWANCE < 0.05
    assert (flag.start, flag.stop) == (first, 200)
    assert flag.values["allowance"] == 0.05
    assert flag.values["spread"] == pytest.approx(width * 0.004 * 99)
    # Lane 9 and 10 stay within 1/19 of 0.396 m = 0.021 m, less than half of the allowance.
    assert flag.values["share"] == 18 / 20
    away = 0.396 * np.abs(np.linspace(-1.0, 1.0, LANES))
    assert flag.values["worst"] == pytest.approx(np.median(away[away > 0.025]))
    assert flag.severity == "danger"
    assert "differ among themselves by up to 0.71 m (allowed 0.050 m)" in flag.detail


def test_a_difference_that_shrinks_again_within_the_settling_time_of_its_peak_is_a_response() -> None:
    rise_and_fall = np.r_[np.linspace(0.0, 0.3, 12), 0.3 * np.exp(-np.arange(60) / 20)]
    assert drifting(rise_and_fall).flags(growth) == ()


def test_a_short_difference_is_not_flagged_however_large() -> None:
    assert drifting(np.linspace(0.2, 4.0, SETTLING)).flags(growth) == ()


def test_plants_that_agree_however_far_from_the_record_do_not_drift() -> None:
    bench = Bench()
    bench.y[100:200] += 0.004 * np.arange(100)[:, None]
    assert bench.flags(growth) == ()


def test_one_odd_plant_on_either_side_is_no_disagreement() -> None:
    bench = Bench()
    bench.y[100:200, 0] += 0.01 * np.arange(100)
    bench.y[100:200, 1] -= 0.01 * np.arange(100)
    assert bench.flags(growth) == ()


@pytest.mark.parametrize(("together", "flagged"), [(4, True), (5, False)])
def test_an_agreement_shorter_than_a_time_constant_does_not_end_a_drift(together: int, flagged: bool) -> None:
    # Either half lasts less than the settling time; only across the break is it a drift.
    bench = drifting(0.1 * np.arange(1, 37))
    bench.y[118 : 118 + together] = bench.record.y[118 : 118 + together, None]
    assert [where(flag)[:2] for flag in bench.flags(growth)] == ([(100, 136)] if flagged else [])


@pytest.mark.parametrize(("value", "flagged"), [(np.nan, True), (np.inf, True), (-1e9, True), (1e3, False)])
def test_a_plant_that_ran_away_is_flagged_to_the_end_of_its_span(value: float, flagged: bool) -> None:
    record = plain_record(spans=(Span(0, 250), Span(260, SAMPLES)))
    bench = Bench(record=record, counted=(Span(10, 250), Span(270, SAMPLES)))
    bench.y[200, :2] = value
    flags = bench.flags(growth)
    assert [where(flag) for flag in flags] == ([(200, 250, "watch")] if flagged else [])
    assert [flag.values["diverged_share"] for flag in flags] == ([0.1] if flagged else [])
    assert all("would not have been stable" in flag.detail for flag in flags)
