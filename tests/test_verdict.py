"""The decision, on hand-made replays."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from auditor.controllers.pid import Pid
from auditor.dangers.interval import Flag
from auditor.identify.plant import Load, Model, Plant
from auditor.logs.record import Span
from auditor.loop import Accept, Actuator, Limits, LogSource, Loop, Signal, Signals
from auditor.objections import Case
from auditor.replay import Measures, Replay, Setting
from auditor.verdict import CAUTIONS, decide, recommend

FIRST, REST = (Span(100, 700),), (Span(700, 1100),)
HOURS = 100.0
SAMPLES = HOURS * 60


def loop(**more: object) -> Loop:
    return Loop(
        name="pool", period=60.0, log=LogSource(paths=("pool.csv",), folder=Path()),
        signals=Signals(
            measurement=Signal(column="level", unit="m"), setpoint=Signal(value=2.0),
            actuator=Actuator(column="gate", unit="%"),
        ),
        **{"limits": Limits(low=1.8, high=2.2, band=0.05), "accept": Accept(max_rms_error=0.03), **more},
    )  # fmt: skip


def model(trust: str = "good") -> Model:
    plant = Plant(
        A=np.eye(1), B0=np.ones(1), B1=np.zeros(1), C=np.ones(1), delay=1, structure="lags", delay_s=60.0, gain=1.0,
        gain_per_s=None, time_constants_s=(600.0,), load=Load(entry="input", phi=0.9, walk=0.0, noise=0.0),
    )  # fmt: skip
    return Model(
        plants=(plant,), best=0, controller=Pid(gain=1.0), controller_source="file", skew_samples=0, null_replay=0.0,
        injected=False, explained_by_error=1.0, period=60.0, tau_cl_s=600.0, peak_sensitivity=1.5, modes=1, dropped=0,
        explained_percent=None, explained_held_out_percent=None, pure_regulation=False, trust=trust,
        reasons=("because the test says so",),
    )  # fmt: skip


def measures(saved: float, rms: float, hours: float = HOURS) -> Measures:
    return Measures(
        updates=(1 - saved) * hours * 60, updates_per_hour=60 * (1 - saved), saved_fraction=saved, rms_error=rms,
        iae_per_hour=rms, max_abs_error=3 * rms, outside_band_s=0.0, outside_limits_s=0.0, min_gap_s=60.0,
        median_gap_s=600.0, max_gap_s=3600.0, peak_updates_per_hour=10.0, actuator_travel=1.0, saturated_s=0.0,
        hours=hours,
    )  # fmt: skip


def replay(saved: float, rms: float, *, spread: float = 0.02, rest_rms: float | None = None, **more: object) -> Replay:
    def around(m: Measures) -> dict[str, tuple[float, float]]:
        return {
            "updates": (m.updates * (1 - spread), m.updates * (1 + spread)),
            "rms_error": (m.rms_error * (1 - spread), m.rms_error * (1 + spread)),
        }

    first, rest = measures(saved, rms, 0.6 * HOURS), measures(saved, rest_rms or rms, 0.4 * HOURS)
    whole = measures(saved, rms)
    plain = Replay(
        setting=Setting(rule="send-on-delta", values={"delta": rms}), measures=whole, interval90=around(whole),
        first=first, rest=rest, by_period=(), answerable=True, refusal=None, trust="good", naive_updates=1.0,
        naive_rms_error=rms, members={}, against_periodic="better", periodic_rms_error=0.05,
        against_periodic_first="better", against_periodic_rest="better", interval90_first=around(first),
        interval90_rest=around(rest),
    )  # fmt: skip
    return replace(plain, **more)


def case(*replays: Replay, flags: tuple[Flag, ...] = (), **more: object) -> Case:
    options = {"loop": loop(), "model": model(), "baseline": measures(0.0, 0.015), **more}
    return Case(replays=replays, flags=flags, first=FIRST, rest=REST, experiment="Make a step.", **options)


def decision(case_: Case) -> tuple[str, str]:
    verdict = decide(case_, recommend(case_))
    return verdict.decision, " ".join(verdict.reasons)


def flag(index: int, start: int, severity: str = "danger") -> Flag:
    return Flag(
        replay=index,
        start=start,
        stop=start + 5,
        cause="limit",
        severity=severity,
        detail="0.04 m over",
        values={"share": 1.0},
    )


def test_a_clean_setting_is_switched_to_with_its_numbers() -> None:
    what, why = decision(case(replay(0.9, 0.02)))
    assert what == "switch"
    assert "90 %" in why
    assert "0.0200 m" in why


def test_the_fewest_updates_win_among_those_with_error_in_reserve() -> None:
    # 0.0285·1.02 is within 0.03, but not within 90 % of it.
    chosen = recommend(case(replay(0.8, 0.020), replay(0.9, 0.024), replay(0.95, 0.0285)))
    assert chosen.replay == 1


def test_a_danger_flag_on_either_part_keeps_the_clock() -> None:
    what, why = decision(case(replay(0.9, 0.02), flags=(flag(0, 800),)))
    assert what == "keep"
    assert "0.04 m over" in why
    assert decision(case(replay(0.9, 0.02), flags=(flag(0, 200),)))[0] == "keep"


def test_a_flag_to_watch_or_outside_the_counted_time_does_not() -> None:
    assert decision(case(replay(0.9, 0.02), flags=(flag(0, 800, "watch"), flag(0, 20))))[0] == "switch"


def test_too_small_a_saving_or_too_large_an_error_keeps_the_clock() -> None:
    assert decision(case(replay(0.1, 0.02)))[0] == "keep"
    assert decision(case(replay(0.9, 0.04)))[0] == "keep"


def test_a_slower_clock_that_does_better_keeps_the_clock() -> None:
    what, why = decision(case(replay(0.9, 0.02, against_periodic_rest="worse")))
    assert what == "keep"
    assert "slowed-down clock" in why


def test_an_error_that_only_holds_on_the_first_part_keeps_the_clock() -> None:
    assert decision(case(replay(0.9, 0.02, rest_rms=0.04)))[0] == "keep"


@pytest.mark.parametrize(
    "case_",
    [
        case(replay(0.9, 0.0298, spread=0.05)),
        case(replay(0.9, 0.02, against_periodic_rest="unclear")),
        case(replay(0.31, 0.02, spread=0.05)),
    ],
    ids=["error", "clock", "saving"],
)
def test_an_interval_that_straddles_the_bound_is_undecided_and_names_the_experiment(case_: Case) -> None:
    what, why = decision(case_)
    assert what == "undecided"
    assert "Make a step." in why


@pytest.mark.parametrize(
    ("more", "word"),
    [
        ({"model": model("none")}, "trusted"),
        ({"model": None}, "trusted"),
        ({"loop": loop(limits=Limits())}, "no low or high limit and no band"),
        ({"loop": loop(limits=Limits(band=0.05))}, "states no low or high limit:"),
        ({"loop": loop(accept=Accept(min_hours=200.0))}, "100 h more"),
    ],
    ids=["trust", "model", "limits", "limit", "hours"],
)
def test_what_cannot_be_decided_is_undecided(more: dict[str, object], word: str) -> None:
    what, why = decision(case(replay(0.9, 0.02), **more))
    assert what == "undecided"
    assert word in why


def test_nothing_answerable_is_undecided_with_the_most_frequent_refusal() -> None:
    refused = replay(0.9, 0.02, answerable=False, refusal="below three steps", trust="none")
    what, why = decision(case(refused, refused))
    assert what == "undecided"
    assert "below three steps" in why


def test_a_safety_loop_is_never_recommended() -> None:
    safe = loop(limits=Limits(low=1.8, high=2.2, band=0.05, safety=True))
    case_ = case(replay(0.9, 0.02), loop=safe)
    assert recommend(case_).replay is None
    assert decision(case_)[0] == "keep"


def test_the_clock_itself_is_never_recommended() -> None:
    clock = replay(0.9, 0.02, setting=Setting(rule="periodic", values={"every": 10.0}))
    assert recommend(case(clock)).replay is None


def test_cautions_are_always_there() -> None:
    case_ = case(replay(0.9, 0.02))
    assert decide(case_, recommend(case_)).cautions == CAUTIONS
    assert any("IEC 61511" in c for c in CAUTIONS)


def on_actuator(saved: float, rms: float) -> Replay:
    return replay(saved, rms, setting=Setting(rule="actuator-deadband", link="actuator", values={"delta": 1.0}))


def test_rules_on_the_actuators_link_are_recommended_only_when_asked_for_alone() -> None:
    both = case(replay(0.8, 0.02), on_actuator(0.95, 0.016))
    assert recommend(both).replay == 0
    what, why = decision(case(on_actuator(0.95, 0.016)))
    assert what == "switch"
    assert "beside the sensor" in why


def test_limits_that_the_record_does_not_keep_itself_decide_nothing() -> None:
    outside = replace(measures(0.0, 0.015), outside_limits_s=0.2 * HOURS * 3600)
    what, why = decision(case(replay(0.9, 0.02), baseline=outside))
    assert what == "undecided"
    assert "outside the stated limits 20 %" in why
