"""`band`: outside the band for too long."""

from __future__ import annotations

from dataclasses import replace

import pytest

from auditor.dangers import band
from tests.dangers.cases import LIMITS, SETTLING, Bench, plain_record, where


def test_an_excursion_longer_than_the_settling_time_is_flagged() -> None:
    bench = Bench()
    bench.y[100 : 100 + SETTLING + 1] = 2.08
    bench.y[110, :] = 1.88
    flag = bench.only_flag(band)
    assert where(flag) == (100, 121, "watch")
    assert flag.values == pytest.approx(
        {"share": 1.0, "duration_s": 21 * 60.0, "worst": 0.12, "band": 0.05, "record_longest_s": 0.0}
    )
    assert flag.detail.startswith("error up to 0.12 m, outside ±0.050 m for 21 min under 100 %")


def test_an_excursion_of_just_the_settling_time_is_not() -> None:
    bench = Bench()
    bench.y[100 : 100 + SETTLING] = 2.08
    assert bench.flags(band) == ()


@pytest.mark.parametrize(("samples", "flagged"), [(30, False), (31, True)])
def test_the_record_sets_the_measure_when_it_stayed_out_longer(samples: int, flagged: bool) -> None:
    y = plain_record().y.copy()
    y[200:230] = 2.06
    bench = Bench(record=plain_record(y=y))
    bench.y[100 : 100 + samples] = 2.08
    flags = bench.flags(band)
    assert [where(flag)[:2] for flag in flags] == ([(100, 131)] if flagged else [])
    assert [flag.values["record_longest_s"] for flag in flags] == ([1800.0] if flagged else [])


def test_near_a_limit_it_is_danger() -> None:
    bench = Bench()
    bench.y[100:130] = 1.84
    assert where(bench.only_flag(band)) == (100, 130, "danger")


def test_without_a_band_there_is_no_flag() -> None:
    bench = Bench(limits=replace(LIMITS, band=None))
    bench.y[100:200] = 1.0
    assert bench.flags(band) == ()


def test_rounding_at_the_band_is_no_excursion() -> None:
    y = plain_record().y.copy()
    y[100:130] = 2.0 - 0.05
    bench = Bench(record=plain_record(y=y), limits=replace(LIMITS, band=2.0 - y[100]))
    bench.y[100:130] = y[100] - 1e-12
    assert bench.flags(band) == ()
