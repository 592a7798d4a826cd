"""`rate`: at the slew limit where the record is not."""

from __future__ import annotations

import numpy as np
import pytest

from auditor.controllers.pid import Pid
from auditor.dangers import rate
from auditor.logs.record import Span
from tests.dangers.cases import SAMPLES, TAU_CL, Bench, plain_record, where

RATED = Pid(gain=12.0, low=0.0, high=100.0, max_rate=6.0 / 60.0)


def ramped(start: int, stop: int, **changes: object) -> Bench:
    """A replayed gate that moves by 6 % a sample from `start` to `stop` − 1, which is its slew limit."""
    bench = Bench(**{"controller": RATED, "record": plain_record(u=np.full(SAMPLES, 50.0)), **changes})
    bench.u[start:stop] += 6.0 * np.arange(1, stop - start + 1)[:, None]
    bench.u[stop:] = bench.u[stop - 1]
    return bench


def test_moves_at_the_slew_limit_are_flagged() -> None:
    bench = ramped(100, 104)
    bench.record.u[100:] += 1.2
    flag = bench.only_flag(rate)
    assert where(flag) == (100, 104, "watch")
    assert flag.values == pytest.approx({"share": 1.0, "duration_s": 240.0, "max_rate": 0.1, "record_rate": 0.02})
    assert flag.detail == (
        "gate moving at its limit of 0.100 %/s for 4 min under 100 % of the likely plants; "
        "the record moved at most at 0.020 %/s"
    )


def test_slower_moves_are_not() -> None:
    bench = ramped(100, 104)
    bench.u[:] = 50.0 + 0.99 * (bench.u - 50.0)
    assert bench.flags(rate) == ()


@pytest.mark.parametrize(("late", "expected"), [(TAU_CL, []), (TAU_CL + 1, [(106, 107)])])
def test_the_record_may_be_as_fast_a_time_constant_away(late: int, expected: list[tuple[int, int]]) -> None:
    u = np.full(SAMPLES, 50.0)
    u[100:] = 56.0
    bench = ramped(100 + late, 101 + late, record=plain_record(u=u))
    assert [where(flag)[:2] for flag in bench.flags(rate)] == expected


def test_a_recorded_move_counts_as_fast_when_its_rounding_may_hide_it() -> None:
    u = np.full(SAMPLES, 50.0)
    u[100:] = 55.0
    assert ramped(100, 101, record=plain_record(u=u)).flags(rate)
    assert not ramped(100, 101, record=plain_record(u=u, u_quantum=1.0)).flags(rate)


def test_a_resolution_coarser_than_the_slew_step_leaves_still_stretches_to_tell() -> None:
    assert ramped(100, 101, record=plain_record(u=np.full(SAMPLES, 50.0), u_quantum=10.0)).flags(rate)


def test_a_jump_over_a_hole_is_no_move() -> None:
    u = np.full(SAMPLES, 50.0)
    u[190:200] = np.nan
    bench = Bench(
        controller=RATED,
        record=plain_record(u=u, spans=(Span(0, 190), Span(200, SAMPLES))),
        counted=(Span(0, 190), Span(200, SAMPLES)),
    )
    bench.u[200:] = 90.0
    assert bench.flags(rate) == ()


def test_without_a_slew_limit_there_is_no_flag() -> None:
    assert ramped(100, 104, controller=Pid(gain=12.0)).flags(rate) == ()
