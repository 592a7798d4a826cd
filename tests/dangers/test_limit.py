"""`limit`: outside low…high where the record is not."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from auditor.dangers import limit
from auditor.loop import Limits
from tests.dangers.cases import Bench, plain_record, where


def test_an_excursion_below_is_flagged_with_its_evidence() -> None:
    bench = Bench()
    bench.record.y[106] = 1.91
    bench.y[100:112, :18] = 1.77
    bench.y[106, :18] = 1.76
    flag = bench.only_flag(limit)
    assert where(flag) == (100, 112, "danger")
    assert flag.values == pytest.approx(
        {"share": 0.9, "duration_s": 720.0, "worst": 0.04, "limit": 1.8, "distance_to_limit": 0.11}
    )  # default tolerance 1e-6: a few subtractions of numbers near 2
    assert flag.detail == (
        "level 0.040 m below the lower limit 1.80 m for 12 min under 90 % of the likely plants; "
        "the record was 0.11 m inside"
    )


def test_an_excursion_above_names_the_upper_limit() -> None:
    bench = Bench()
    bench.y[50, :] = 2.4
    flag = bench.only_flag(limit)
    assert where(flag) == (50, 51, "danger")
    assert flag.values["worst"] == pytest.approx(0.1)
    assert "above the upper limit 2.30 m" in flag.detail


def test_the_worse_side_is_told_when_both_are_left() -> None:
    bench = Bench()
    bench.y[50, :] = 2.33
    bench.y[55, :] = 1.7
    assert bench.only_flag(limit).values["limit"] == 1.8


@pytest.mark.parametrize(("replayed", "flagged"), [(1.74, False), (1.71, True)])
def test_where_the_record_is_outside_the_replay_must_be_further_out_by_the_band(replayed: float, flagged: bool) -> None:
    y = plain_record().y.copy()
    y[200:210] = 1.77
    bench = Bench(record=plain_record(y=y))
    bench.y[200:210] = replayed
    flags = bench.flags(limit)
    assert [where(flag) for flag in flags] == ([(200, 210, "danger")] if flagged else [])
    assert [flag.values["distance_to_limit"] for flag in flags] == pytest.approx([-0.03] if flagged else [])


def test_where_the_record_is_outside_and_no_band_is_stated_nothing_can_be_said() -> None:
    y = plain_record().y.copy()
    y[200:210] = 1.77
    bench = Bench(record=plain_record(y=y), limits=Limits(low=1.8))
    bench.y[200:210] = 1.0
    assert bench.flags(limit) == ()


def test_the_other_side_than_the_record_counts() -> None:
    y = plain_record().y.copy()
    y[200:210] = 2.35
    bench = Bench(record=plain_record(y=y))
    bench.y[200:210] = 1.79
    assert where(bench.only_flag(limit)) == (200, 210, "danger")


def test_rounding_at_the_limit_is_no_excursion() -> None:
    y = plain_record().y.copy()
    y[200:210] = 1.8
    bench = Bench(record=plain_record(y=y))
    bench.y[200:210] = np.nextafter(1.8, 0.0)
    assert bench.flags(limit) == ()


def test_without_limits_there_is_no_flag() -> None:
    bench = Bench(limits=replace(Bench().limits, low=None, high=None))
    bench.y[200:210] = 0.0
    assert bench.flags(limit) == ()
