"""`saturation`: at a limit where the record is not."""

from __future__ import annotations

from dataclasses import replace

import pytest

from auditor.controllers.pid import Pid
from auditor.dangers import saturation
from tests.dangers.cases import TAU_CL, Bench, plain_record, where


@pytest.mark.parametrize(("at", "name"), [(100.0, "upper"), (0.0, "lower")])
def test_an_actuator_at_its_limit_is_flagged(at: float, name: str) -> None:
    u = plain_record().u.copy()
    u[200:210] = 60.0
    bench = Bench(record=plain_record(u=u))
    bench.u[200:210, :12] = at
    flag = bench.only_flag(saturation)
    assert where(flag) == (200, 210, "danger")
    distance = abs(at - 60.0)
    assert flag.values == {"share": 0.6, "duration_s": 600.0, "limit": at, "distance_to_limit": distance}
    assert flag.detail.startswith(f"gate at its {name} limit")
    assert flag.detail.endswith(
        f"for 10 min under 60 % of the likely plants; in that time the record came no closer than {distance:.0f} %"
    )


@pytest.mark.parametrize(("late", "expected"), [(TAU_CL, []), (TAU_CL + 1, [(215, 216)])])
def test_the_moment_may_move_by_a_time_constant(late: int, expected: list[tuple[int, int]]) -> None:
    u = plain_record().u.copy()
    u[200:210] = 100.0
    bench = Bench(record=plain_record(u=u))
    bench.u[209 : 209 + late + 1] = 100.0
    assert [where(flag)[:2] for flag in bench.flags(saturation)] == expected


def test_the_other_limit_than_the_record_counts() -> None:
    u = plain_record().u.copy()
    u[200:210] = 100.0
    bench = Bench(record=plain_record(u=u))
    bench.u[200:210] = 0.0
    assert where(bench.only_flag(saturation)) == (200, 210, "danger")


@pytest.mark.parametrize(("quantum", "flagged"), [(None, False), (1.0, True)])
def test_within_half_the_stored_step_is_at_the_limit(quantum: float | None, flagged: bool) -> None:
    bench = Bench(record=plain_record(u_quantum=quantum))
    bench.u[200:210] = 99.6
    assert bool(bench.flags(saturation)) is flagged


def test_the_record_knows_the_limits_when_the_controller_does_not() -> None:
    bench = Bench(record=replace(plain_record(), high=80.0), controller=Pid(gain=12.0))
    bench.u[200:210] = 80.0
    assert bench.only_flag(saturation).values["limit"] == 80.0


def test_without_limits_there_is_no_flag() -> None:
    bench = Bench(controller=Pid(gain=12.0))
    bench.u[200:210] = 1e9
    assert bench.flags(saturation) == ()
