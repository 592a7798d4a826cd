"""What all detectors have in common: merging, shares, severity, the table."""

from __future__ import annotations

import numpy as np
import pytest

from auditor.controllers.pid import Pid
from auditor.dangers import DETECTORS, find_flags, limit, rate
from auditor.dangers.base import near_limits
from auditor.dangers.flags import _stretches
from auditor.logs.record import Span
from tests.dangers.cases import SAMPLES, SETTLING, Bench, plain_record, where


def lowered(lanes: int, of: int) -> Bench:
    """A replay that is below the lower limit for ten samples under some lanes."""
    bench = Bench(lanes=of)
    bench.y[100:110, :lanes] = 1.7
    return bench


@pytest.mark.parametrize(
    ("lanes", "of", "severity"),
    [(1, 24, None), (1, 20, "watch"), (9, 20, "watch"), (10, 20, "danger"), (20, 20, "danger")],
)
def test_severity_follows_the_share_of_the_likely_plants(lanes: int, of: int, severity: str | None) -> None:
    flags = lowered(lanes, of).flags(limit)
    assert [flag.severity for flag in flags] == ([severity] if severity else [])
    assert [flag.values["share"] for flag in flags] == ([lanes / of] if severity else [])


def test_stretches_closer_than_the_settling_time_are_one_flag() -> None:
    bench = Bench()
    bench.y[100:105, 0:4] = bench.y[105 + SETTLING - 1 : 130, 4:8] = 1.7
    flag = bench.only_flag(limit)
    assert where(flag) == (100, 130, "watch")
    assert flag.values["share"] == 8 / 20
    bench.y[105 + SETTLING - 1, :] = 2.0
    assert [where(flag)[:2] for flag in bench.flags(limit)] == [(100, 105), (125, 130)]


def test_duration_is_the_median_time_in_danger_over_the_lanes_concerned() -> None:
    bench = Bench()
    for lane, samples in enumerate((2, 4, 9)):
        bench.y[100 : 100 + samples, lane] = 1.7
    assert bench.only_flag(limit).values["duration_s"] == 4 * 60.0


def test_only_counted_samples_can_be_in_danger() -> None:
    bench = Bench(counted=(Span(50, 100), Span(120, SAMPLES)))
    bench.y[40:150] = 1.7
    assert [where(flag)[:2] for flag in bench.flags(limit)] == [(50, 100), (120, 150)]


def test_the_record_itself_raises_nothing() -> None:
    assert find_flags(Bench().case(), 0) == ()


def test_flags_come_in_order_of_time_with_their_replay() -> None:
    bench = Bench()
    bench.u[300:310] = 100.0
    bench.y[200:205] = 1.7
    flags = find_flags(bench.case(), 7)
    assert [(flag.cause, flag.start) for flag in flags] == [
        ("limit", 200),
        ("outside-model", 200),
        ("saturation", 300),
        ("outside-model", 300),
    ]
    assert {flag.replay for flag in flags} == {7}


def test_detectors_are_told_apart_by_cause_and_explain_themselves() -> None:
    causes = [detector.CAUSE for detector in DETECTORS]
    assert len(set(causes)) == len(causes)
    assert len({detector.MEANING for detector in DETECTORS} - {""}) == len(causes)


def test_a_diverged_replay_is_flagged_with_finite_evidence() -> None:
    bench = Bench()
    bench.y[300:, :] = np.inf
    bench.y[320:, :] = np.nan
    bench.u[300:, :] = np.nan
    flags = find_flags(bench.case(), 0)
    assert {"limit", "growth"} <= {flag.cause for flag in flags}
    assert all(np.isfinite(list(flag.values.values())).all() for flag in flags)


@pytest.mark.parametrize(("lanes", "near"), [(9, False), (10, True)])
def test_near_the_limits_means_within_a_band_in_half_of_all_lanes(lanes: int, near: bool) -> None:
    bench = Bench()
    bench.y[100:110, :10] = 1.7
    bench.y[100:110, :lanes] = 1.84
    case = bench.case()
    mask = np.zeros_like(bench.updated)
    mask[102:104] = True
    (stretch,) = _stretches(case, {"any": mask})
    bench.y[100:110, lanes:] = 1.86
    assert near_limits(case, stretch) is near


def test_a_process_near_its_limits_elsewhere_in_the_stretch_does_not_count() -> None:
    bench = Bench()
    mask = np.zeros_like(bench.updated)
    mask[[100, 110]] = True
    bench.y[105] = 1.7
    (stretch,) = _stretches(bench.case(), {"any": mask})
    assert not near_limits(bench.case(), stretch)


def test_a_capped_cause_stays_watch_away_from_the_limits() -> None:
    bench = Bench(record=plain_record(u=np.full(SAMPLES, 50.0)), controller=Pid(gain=12.0, max_rate=5.0 / 60))
    bench.u[100:] = 55.0
    assert where(bench.only_flag(rate)) == (100, 101, "watch")
    bench.y[100] = 1.84
    assert where(bench.only_flag(rate)) == (100, 101, "danger")
