from __future__ import annotations

import pytest

from auditor.replay import Setting
from auditor.report.phrases import clean, measured, rule_title, settings_text, whole
from tests.report.fake_audit import make_loop


@pytest.mark.parametrize(
    ("setting", "text"),
    [
        (Setting(rule="send-on-delta", values={"delta": 0.01}), "delta 0.0100 m"),
        (
            Setting(rule="send-on-delta", values={"delta": 0.01}, max_silence_s=900.0),
            "delta 0.0100 m, longest silence 15 min",
        ),
        (Setting(rule="send-on-area", values={"area": 2.5}, min_gap_s=60.0), "area 2.50 m·s, shortest gap 1 min"),
        (Setting(rule="periodic", values={"every": 4.0}), "every 4 samples (4 min)"),
        (Setting(rule="actuator-deadband", link="actuator", values={"delta": 2.0}), "delta 2.00 %"),
        (Setting(rule="my-own", values={"window_s": 7200.0, "odd_knob": 3.0}), "window 2 h, odd knob 3.00"),
        (Setting(rule="my-own"), "no settings"),
    ],
)
def test_settings_carry_their_units(setting: Setting, text: str) -> None:
    assert settings_text(setting, make_loop()) == text


def test_the_silence_of_the_limits_is_written_only_in_full() -> None:
    setting = Setting(rule="send-on-delta", values={"delta": 0.01}, max_silence_s=1800.0)
    assert settings_text(setting, make_loop()) == "delta 0.0100 m"
    assert settings_text(setting, make_loop(), full=True) == "delta 0.0100 m, longest silence 30 min"


def test_a_rule_is_named_with_what_is_unusual_about_it() -> None:
    assert rule_title(Setting(rule="send-on-delta")) == "send-on-delta"
    unusual = Setting(rule="send-on-delta", link="actuator", signal="measurement", between="run")
    assert rule_title(unusual) == (
        "send-on-delta, on the actuator link, watching the measurement, controller runs between updates"
    )
    assert rule_title(Setting(rule="actuator-deadband", link="actuator")) == "actuator-deadband"


@pytest.mark.parametrize(
    ("value", "interval", "text"),
    [
        (0.02181, (0.02062, 0.02249), "0.0218 [0.0206 … 0.0225]"),
        (2383.0, (2310.0, 2479.0), "2\u202f383 [2\u202f310 … 2\u202f479]"),
        (0.02, (0.02, 0.02), "0.02000 [0.02000 … 0.02000]"),
        (1.0, (0.5, 9.0), "1.0 [0.5 … 9.0]"),
        (None, None, "–"),
        (float("nan"), (0.0, 1.0), "–"),
        (3.0, (float("nan"), 1.0), "3.00"),
        (3.0, None, "3.00"),
    ],
)
def test_an_answer_has_the_decimals_its_interval_deserves(
    value: float | None, interval: tuple[float, float] | None, text: str
) -> None:
    assert measured(value, interval) == text


def test_control_characters_become_blanks() -> None:
    assert clean("a\x07b\nc\ud800 µ³") == "a b c  µ³"


def test_counts_are_whole() -> None:
    assert whole(18560.0) == "18\u202f560"
