"""Settings, answers and decisions as people read them; no layout."""

from __future__ import annotations

import math
import unicodedata

from auditor.dangers import DETECTORS
from auditor.loop import Loop
from auditor.replay import Setting
from auditor.rules import RULES
from auditor.text import duration, number

DECISIONS = {
    "switch": "Switch this loop to event-based updates.",
    "keep": "Keep the present clock.",
    "undecided": "Undecided: this log does not settle the question.",
}

CAUSES = {detector.CAUSE: detector.MEANING for detector in DETECTORS}

_WORDS = {"max_silence_s": "longest silence", "min_gap_s": "shortest gap", "every": "every"}


def clean(text: str) -> str:
    """Drop characters that cannot stand in a page or a picture: control characters and lone surrogates."""
    return "".join(c if unicodedata.category(c) not in ("Cc", "Cs") else " " for c in text)


def rule_title(setting: Setting) -> str:
    """Name the rule, its link, and what is unusual about how it is used."""
    parts = [clean(setting.rule)]
    usual = RULES[setting.rule].link if setting.rule in RULES else "sensor"
    if setting.link != usual:
        parts.append(f"on the {clean(setting.link)} link")
    if setting.signal != "error":
        parts.append(f"watching the {clean(setting.signal)}")
    if setting.between != "hold":
        parts.append("controller runs between updates")
    return ", ".join(parts)


def settings_text(setting: Setting, loop: Loop, *, full: bool = False) -> str:
    """Write the values of a setting with their units, such as ``delta 0.01 m, longest silence 15 min``.

    A longest silence that is the one of the limits is written only when `full`.
    """
    listed = {k: v for k, v in setting.settings.items() if k not in ("signal", "between")}
    if not full and listed.get("max_silence_s") == loop.limits.max_silence:
        listed.pop("max_silence_s", None)
    parts = [_one_setting(setting, name, float(value), loop) for name, value in listed.items()]
    return ", ".join(parts) or "no settings"


def _one_setting(setting: Setting, name: str, value: float, loop: Loop) -> str:
    unit = setting_unit(setting, name, loop)
    words = _WORDS.get(name, clean(name.removesuffix("_s").replace("_", " ")))
    if unit == "samples":
        return f"{words} {value:g} samples ({duration(value * loop.period)})"
    if unit == "s":
        return f"{words} {duration(value)}"
    return f"{words} {number(value)} {unit}".rstrip()


def setting_unit(setting: Setting, name: str, loop: Loop) -> str:
    """Return the unit of one setting; signals stand in a rule's units by their role."""
    if name.endswith("_s"):
        return "s"
    specs = RULES[setting.rule].settings if setting.rule in RULES else ()
    stated = next((spec.unit for spec in specs if spec.name == name), "")
    signals = loop.signals
    watched = signals.actuator.unit if setting.link == "actuator" else signals.measurement.unit
    stated = stated.replace("command", clean(signals.actuator.unit) or "units")
    return stated.replace("measurement", clean(watched) or "units")


def whole(value: float) -> str:
    """Write a count with thin spaces between thousands."""
    return f"{value:,.0f}".replace(",", "\u202f")


def measured(value: float | None, interval: tuple[float, float] | None) -> str:
    """Write an answer with its 90 % interval, with as many decimals as the interval's width deserves."""
    if value is None or not math.isfinite(value):
        return "–"
    if interval is None or not all(map(math.isfinite, interval)):
        return number(value)
    width = interval[1] - interval[0]
    if width <= 0:
        return f"{number(value, 4)} [{number(interval[0], 4)} … {number(interval[1], 4)}]"
    largest = max(abs(value), abs(interval[0]), abs(interval[1]))
    digits = max(2, 2 + math.floor(math.log10(largest)) - math.floor(math.log10(width)))
    low, middle, high = (_same_decimals(x, largest, digits) for x in (interval[0], value, interval[1]))
    return f"{middle} [{low} … {high}]"


def _same_decimals(value: float, largest: float, digits: int) -> str:
    if largest >= 1e7 or largest < 1e-4:
        return number(value, digits)
    decimals = max(0, digits - 1 - math.floor(math.log10(largest)))
    return f"{value:,.{decimals}f}".replace(",", "\u202f")
