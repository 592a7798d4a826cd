"""What speaks against a setting on one part of the record: saving, error, slowed-down clock, dangers (method, §6)."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from auditor.dangers.interval import Flag
from auditor.identify.plant import Model
from auditor.logs.record import Span
from auditor.loop import Loop
from auditor.replay import Measures, Replay
from auditor.text import number, percent

RMS_MARGIN = 1.25
"""Largest RMS error accepted when the owner states none, as a multiple of the record's."""


def accepted_rms_error(loop: Loop, baseline: Measures | None) -> float | None:
    """Return the largest RMS error accepted [measurement unit], as stated or `RMS_MARGIN` times the record's own.

    None when the owner states none and the record has no measures.
    """
    if loop.accept.max_rms_error is not None:
        return loop.accept.max_rms_error
    return None if baseline is None else RMS_MARGIN * baseline.rms_error


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Case:
    """What a decision is made from.

    Attributes
    ----------
    first, rest : tuple of Span
        The part a setting is chosen on, and the part it is judged on.
    experiment : str
        What would settle an undecided case.
    """

    loop: Loop
    model: Model | None
    baseline: Measures | None
    replays: Sequence[Replay]
    flags: Sequence[Flag]
    first: Sequence[Span]
    rest: Sequence[Span]
    experiment: str

    @property
    def hours(self) -> float:
        """Counted hours."""
        return self.baseline.hours if self.baseline is not None else 0.0

    @property
    def max_rms(self) -> float:
        """Largest RMS error accepted [measurement unit]."""
        accepted = accepted_rms_error(self.loop, self.baseline)
        return math.inf if accepted is None else accepted


@dataclass(frozen=True, slots=True)
class Objections:
    """What speaks against one setting on one part: certain failures, and intervals that straddle the bound."""

    fails: tuple[str, ...]
    straddles: tuple[str, ...]


def examine(case: Case, index: int, part: str) -> Objections:
    """Hold one setting against what the owner asks for, on "first" or "rest"."""
    replay = case.replays[index]
    checks = (
        _saving(case, replay, part),
        _error(case, replay, part),
        _clock(replay, part),
        _dangers(case, index, part),
    )
    fails = tuple(text for kind, text in checks if kind == "fails")
    straddles = tuple(text for kind, text in checks if kind == "straddles")
    return Objections(fails, straddles)


def _saving(case: Case, replay: Replay, part: str) -> tuple[str, str]:
    measures, intervals = _part(replay, part)
    samples = measures.hours * 3600.0 / case.loop.period
    asked = case.loop.accept.min_saved_fraction
    low, high = (1.0 - intervals["updates"][1] / samples, 1.0 - intervals["updates"][0] / samples)
    if high < asked:
        return "fails", f"it saves {percent(measures.saved_fraction)} of the updates; {percent(asked)} is asked for"
    if low < asked:
        return "straddles", f"its saving lies between {percent(low)} and {percent(high)}; {percent(asked)} is asked for"
    return "holds", ""


def _error(case: Case, replay: Replay, part: str) -> tuple[str, str]:
    measures, intervals = _part(replay, part)
    unit = case.loop.signals.measurement.unit
    low, high = intervals["rms_error"]
    most = f"at most {number(case.max_rms)} {unit} is accepted"
    if low > case.max_rms:
        return "fails", f"its RMS error is {number(measures.rms_error)} {unit}; {most}"
    if high > case.max_rms:
        return "straddles", f"its RMS error lies between {number(low)} and {number(high)} {unit}; {most}"
    return "holds", ""


def _clock(replay: Replay, part: str) -> tuple[str, str]:
    against = replay.against_periodic_first if part == "first" else replay.against_periodic_rest
    if against == "worse":
        return "fails", "a slowed-down clock with no more updates does better"
    if against == "unclear":
        return "straddles", "it cannot be told from a slowed-down clock with no more updates"
    return "holds", ""


def _dangers(case: Case, index: int, part: str) -> tuple[str, str]:
    spans = case.first if part == "first" else case.rest
    found = [f for f in case.flags if f.replay == index and f.severity == "danger" and _touches(f, spans)]
    if not found:
        return "holds", ""
    # Leaving the limits is what an owner asks about first.
    found.sort(key=lambda f: (f.cause != "limit", f.start))
    causes = ", ".join(dict.fromkeys(f.cause for f in found))
    return (
        "fails",
        f"{len(found)} danger flag{'s' if len(found) > 1 else ''} ({causes}); first of all: {found[0].detail}",
    )


def _touches(flag: Flag, spans: Sequence[Span]) -> bool:
    return any(flag.start < s.stop and flag.stop > s.start for s in spans)


def _part(replay: Replay, part: str) -> tuple[Measures, dict[str, tuple[float, float]]]:
    if part == "first":
        return replay.first, dict(replay.interval90_first)
    return replay.rest, dict(replay.interval90_rest)
