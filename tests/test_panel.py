"""Settings to replay: the loop file's own, or a panel scaled from the log."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from auditor.controllers.pid import Pid
from auditor.errors import RuleError
from auditor.logs.record import Record, Span
from auditor.loop import Actuator, Limits, LogSource, Loop, RuleRequest, Signal, Signals
from auditor.panel import make_settings, one_setting, requested
from auditor.rules import RULES


def loop(**more: object) -> Loop:
    return Loop(
        name="pool", period=60.0, log=LogSource(paths=("pool.csv",), folder=Path()),
        signals=Signals(
            measurement=Signal(column="level", unit="m"), setpoint=Signal(value=2.0),
            actuator=Actuator(column="gate", unit="%"),
        ),
        **more,
    )  # fmt: skip


def record(quantum: float | None = None) -> Record:
    n = 4000
    e = np.random.default_rng(1).normal(0, 0.02, n)
    return Record(
        period=60.0, start=0, y=-e, r=np.zeros(n), u=e, w=np.zeros((0, n)), valid=np.ones(n, dtype=bool),
        spans=(Span(0, n),), y_quantum=quantum,
    )  # fmt: skip


def test_lists_are_swept_in_all_combinations() -> None:
    rules = (RuleRequest(rule="level-crossing", settings={"spacing": (0.01, 0.02), "hysteresis": (0.0, 0.001, 0.002)}),)
    settings = requested(loop(rules=rules), 60.0)
    assert [(s.values["spacing"], s.values["hysteresis"]) for s in settings] == [
        (0.01, 0.0), (0.01, 0.001), (0.01, 0.002), (0.02, 0.0), (0.02, 0.001), (0.02, 0.002),
    ]  # fmt: skip


def test_a_rule_inherits_the_owners_longest_silence_and_the_clock_does_not() -> None:
    limits = Limits(max_silence=1800.0)
    rules = (
        RuleRequest(rule="send-on-delta", settings={"delta": (0.01,)}),
        RuleRequest(rule="send-on-delta", settings={"delta": (0.01,), "max_silence_s": (600.0,)}),
        RuleRequest(rule="periodic", settings={"every": (4.0,)}),
    )
    assert [s.max_silence_s for s in requested(loop(rules=rules, limits=limits), 60.0)] == [1800.0, 600.0, None]


def test_the_slowed_down_clock_is_always_replayed() -> None:
    rules = (RuleRequest(rule="send-on-delta", settings={"delta": (0.01,)}),)
    settings = make_settings(loop(rules=rules), record(), Pid(gain=100.0), 600.0)
    assert [s.rule for s in settings[:2]] == ["send-on-delta", "periodic"]
    stated = (*rules, RuleRequest(rule="periodic", settings={"every": (4.0,)}))
    settings = make_settings(loop(rules=stated), record(), Pid(gain=100.0), 600.0)
    assert [s.rule for s in settings] == ["send-on-delta", "periodic"]


def test_wrong_rules_are_told_together() -> None:
    rules = (
        RuleRequest(rule="send-on-dleta", settings={"delta": (0.01,)}),
        RuleRequest(rule="send-on-area", settings={"delta": (0.01,)}),
        RuleRequest(rule="send-on-delta", settings={"delta": (0.01,), "min_gap_s": (600.0,), "max_silence_s": (60.0,)}),
    )
    with pytest.raises(RuleError) as caught:
        requested(loop(rules=rules), 60.0)
    text = str(caught.value)
    assert "no rule 'send-on-dleta'" in text
    assert "no setting 'delta'" in text
    assert "max_silence of rule 'send-on-delta' is shorter than its min_gap" in text


def test_the_panel_has_every_rule_and_never_asks_below_the_logs_resolution() -> None:
    settings = make_settings(loop(limits=Limits(band=0.05)), record(quantum=0.005), Pid(gain=100.0), 600.0)
    assert {s.rule for s in settings} == set(RULES)
    assert min(s.values["delta"] for s in settings if s.rule == "send-on-delta") >= 3 * 0.005
    assert max(s.values["delta"] for s in settings if s.rule == "send-on-delta") >= 0.05


def test_the_panel_scales_with_the_units_of_the_log() -> None:
    # The same record in centimetres must give the same panel in centimetres; thresholds carry three digits.
    from dataclasses import replace

    in_m = record()
    in_cm = replace(in_m, y=100 * in_m.y, r=100 * in_m.r)
    a = make_settings(loop(), in_m, Pid(gain=100.0), 600.0)
    b = make_settings(loop(), in_cm, Pid(gain=1.0), 600.0)
    pick = lambda rows: [s.values["delta"] for s in rows if s.rule == "send-on-delta"]  # noqa: E731
    np.testing.assert_allclose(pick(b), 100 * np.array(pick(a)), rtol=0.011)


def test_what_has_no_use_on_the_actuators_link_is_refused() -> None:
    rule = RuleRequest(
        rule="send-on-delta", link="actuator", signal="measurement", between="run", settings={"delta": (1.0,)}
    )
    with pytest.raises(RuleError) as caught:
        requested(loop(rules=(rule,)), 60.0)
    assert [problem.found for problem in caught.value.problems] == ['signal = "measurement"', 'between = "run"']


def test_an_unknown_link_is_refused() -> None:
    with pytest.raises(RuleError, match="no link 'radio'"):
        one_setting("send-on-delta", {"delta": 1.0}, loop(), "radio")
    with pytest.raises(RuleError, match="no link 'sensor'"):
        one_setting("actuator-deadband", {"delta": 1.0}, loop(), "sensor")
