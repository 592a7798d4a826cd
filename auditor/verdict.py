"""Recommendation, verdict and cautions (method, §6): chosen on the first part of the record, judged on the rest."""

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

CAUTIONS = (
    "An offline replay on an identified model is not a proof of stability.",
    "Safety functions stay on their fixed schedule and out of this; for safety instrumented functions IEC 61511 "
    "applies.",
    "A change of update scheme goes through the site's management of change and a licensed control engineer, under the "
    "codes that apply there.",
    "Run a pilot first, with the watchdog on: no update for longer than the longest silence brings the fixed clock "
    "back.",
    "The replay takes the disturbances as they came. Where the world reacts to the measurement (weirs, "
    "pressure-dependent demand) it does so here only through the model.",
)

RMS_MARGIN = 1.25
"""Largest RMS error accepted when the owner states none, as a multiple of the record's."""

RESERVE = 0.9
"""A setting is chosen with the upper end of its error interval within this share of what is accepted: the rest of the
record, and the year after, will not be kinder than the part it was chosen on."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Recommendation:
    """The setting that would be chosen, on the first part of the record alone.

    `replay` is an index into the audit's replays, None when nothing can be recommended.
    """

    replay: int | None
    reasons: tuple[str, ...]


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Verdict:
    """`decision` is "switch", "keep" or "undecided"; reasons carry their numbers."""

    decision: str
    reasons: tuple[str, ...]
    cautions: tuple[str, ...]


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
        stated = self.loop.accept.max_rms_error
        if stated is not None:
            return stated
        return RMS_MARGIN * self.baseline.rms_error if self.baseline is not None else math.inf


@dataclass(frozen=True, slots=True)
class Findings:
    """What speaks against one setting on one part: certain failures, and intervals that straddle the bound."""

    fails: tuple[str, ...]
    straddles: tuple[str, ...]


def examine(case: Case, index: int, part: str) -> Findings:
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
    return Findings(fails, straddles)


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


def candidates(case: Case) -> list[int]:
    """Event rules that the log can answer.

    Rules on the link to the actuator need a controller that sits beside the sensor and sees every sample. Where rules
    on the sensor's link were replayed too, the record does not say which link is to be relieved, and only the sensor's
    are recommended; ask for the others alone, under [[rules]], to have them decided on.
    """
    events = [i for i, r in enumerate(case.replays) if r.setting.rule != "periodic"]
    on_sensor = [i for i in events if case.replays[i].setting.link == "sensor"]
    return [i for i in on_sensor or events if case.replays[i].answerable and case.replays[i].trust != "none"]


def recommend(case: Case) -> Recommendation:
    """Choose on the first part: of the settings nothing speaks against there, the one with the fewest updates."""
    if case.loop.limits.safety:
        return Recommendation(replay=None, reasons=("The loop is marked as a safety function.",))
    seen = {i: examine(case, i, "first") for i in candidates(case)}
    clean = [i for i, found in seen.items() if not found.fails and not found.straddles]
    roomy = [i for i in clean if case.replays[i].interval90_first["rms_error"][1] <= RESERVE * case.max_rms]
    open_ones = [i for i, found in seen.items() if not found.fails]
    pool = roomy or clean or open_ones
    if not pool:
        return Recommendation(replay=None, reasons=_why_none(case, seen))
    if roomy:
        chosen = min(roomy, key=lambda i: (case.replays[i].first.updates, case.replays[i].first.rms_error, i))
    else:
        # Without reserve anywhere, the setting with the smallest error is the one most likely to hold.
        chosen = min(pool, key=lambda i: (case.replays[i].first.rms_error, case.replays[i].first.updates, i))
    return Recommendation(replay=chosen, reasons=_why_chosen(case, chosen, seen[chosen], reserve=bool(roomy)))


def _why_chosen(case: Case, chosen: int, found: Findings, *, reserve: bool) -> tuple[str, ...]:
    replay = case.replays[chosen]
    unit = case.loop.signals.measurement.unit
    facts = f"{percent(replay.first.saved_fraction)} saved, RMS error {number(replay.first.rms_error)} {unit}"
    if found.straddles:
        return (
            f"On the first part of the record nothing certain speaks against it ({facts}), but: "
            f"{'; '.join(found.straddles)}.",
        )
    if reserve:
        return (
            f"On the first part of the record it has the fewest updates of all settings that keep what is asked for "
            f"with {percent(1 - RESERVE)} of the accepted error in reserve: {facts}.",
        )
    return (
        f"On the first part of the record it has the smallest error of the settings that keep what is asked for; none "
        f"leaves {percent(1 - RESERVE)} of the accepted error in reserve: {facts}.",
    )


def _why_none(case: Case, seen: dict[int, Findings]) -> tuple[str, ...]:
    if not seen:
        return ("No event rule was answerable from this log.",)
    nearest = min(seen, key=lambda i: (len(seen[i].fails), case.replays[i].first.updates, i))
    label = setting_label(case.replays[nearest])
    return (
        f"None of the {len(seen)} settings that the log can answer keeps what is asked for on the first part of the "
        "record.",
        f"The nearest is {label}: {'; '.join(seen[nearest].fails)}.",
    )


def setting_label(replay: Replay) -> str:
    """Name a setting in one line."""
    values = ", ".join(f"{k} {number(v)}" for k, v in replay.setting.values.items())
    return f"{replay.setting.rule} ({values})" if values else replay.setting.rule


def decide(case: Case, recommendation: Recommendation) -> Verdict:
    """Return the verdict with its reasons in numbers."""
    decision, reasons = _decide(case, recommendation)
    return Verdict(decision=decision, reasons=reasons, cautions=CAUTIONS)


def _decide(case: Case, recommendation: Recommendation) -> tuple[str, tuple[str, ...]]:
    if case.loop.limits.safety:
        return "keep", ("The loop is marked as a safety function: it stays on its fixed schedule.",)
    open_questions = _cannot_decide(case)
    if open_questions:
        return "undecided", open_questions
    if recommendation.replay is None:
        if not candidates(case):
            return "undecided", (*recommendation.reasons, *_refusals(case), case.experiment)
        return "keep", recommendation.reasons
    return _judge(case, recommendation.replay)


def _cannot_decide(case: Case) -> tuple[str, ...]:
    """Reasons for which no setting can be decided on at all."""
    reasons: list[str] = []
    if case.model is None or case.model.trust == "none":
        why = case.model.reasons if case.model is not None else ()
        reasons += [*why, f"No model of the loop can be trusted. {case.experiment}"]
    if not case.loop.limits.stated:
        missing = _missing(case)
        reasons.append(f"[limits] states no {missing}: it is the owner's, and without it no danger can be told.")
    if case.model is not None and case.hours < case.loop.accept.min_hours:
        reasons.append(
            f"{number(case.hours)} h can be counted after the warm-up; {number(case.loop.accept.min_hours)} h are "
            f"asked for: {number(case.loop.accept.min_hours - case.hours)} h more would settle it."
        )
    return tuple(reasons)


def _missing(case: Case) -> str:
    limits = case.loop.limits
    bounds = () if limits.low is not None or limits.high is not None else ("low or high limit",)
    return " and no ".join((*bounds, *(() if limits.band is not None else ("band",))))


def _refusals(case: Case) -> tuple[str, ...]:
    refused = [r.refusal for r in case.replays if r.refusal and r.setting.rule != "periodic"]
    return (f"The most frequent refusal: {max(set(refused), key=refused.count)}.",) if refused else ()


def _judge(case: Case, chosen: int) -> tuple[str, tuple[str, ...]]:
    """Judge the chosen setting on both parts."""
    parts = {"first": examine(case, chosen, "first"), "rest": examine(case, chosen, "rest")}
    names = {"first": "on the part it was chosen on", "rest": "on the rest of the record"}
    fails = tuple(f"{names[p].capitalize()}: {text}." for p, found in parts.items() for text in found.fails)
    straddles = tuple(f"{names[p].capitalize()}: {text}." for p, found in parts.items() for text in found.straddles)
    label = setting_label(case.replays[chosen])
    if fails:
        return "keep", (f"The best setting, {label}, does not hold.", *fails, *straddles)
    if straddles:
        return "undecided", (f"The best setting, {label}, cannot be decided on.", *straddles, case.experiment)
    return "switch", _why_switch(case, case.replays[chosen])


def _why_switch(case: Case, replay: Replay) -> tuple[str, ...]:
    unit = case.loop.signals.measurement.unit
    low, high = replay.interval90["rms_error"]
    record = case.baseline.rms_error if case.baseline is not None else math.nan
    reasons = [
        f"{setting_label(replay)} would have saved {percent(replay.measures.saved_fraction)} of the updates over "
        f"{number(case.hours)} h ({percent(replay.first.saved_fraction)} on the part it was chosen on, "
        f"{percent(replay.rest.saved_fraction)} on the rest).",
        f"Its RMS error is {number(replay.measures.rms_error)} {unit} (90 % interval {number(low)}…{number(high)}); "
        f"the record's is {number(record)} {unit}, and at most {number(case.max_rms)} {unit} is accepted.",
    ]
    if replay.periodic_rms_error is not None:
        reasons.append(
            f"The best slowed-down clock with no more updates has {number(replay.periodic_rms_error)} {unit}."
        )
    reasons.append("No danger flag stands on either part.")
    if replay.setting.link == "actuator":
        reasons.append("It saves messages to the actuator only: the controller must sit beside the sensor.")
    return tuple(reasons)
