"""Recommendation, verdict and cautions (method, §6): chosen on the first part of the record, judged on the rest."""

from __future__ import annotations

import math
from dataclasses import dataclass

from auditor.objections import Case, Objections, examine
from auditor.rules import get_rule
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

OUTSIDE = 0.05
"""Share of the counted time outside its limits from which the record says that the limits are not its own."""

RESERVE = 0.9
"""A setting is chosen with the upper end of its error interval within this share of what is accepted: the rest of the
record, and the year after, will not be kinder than the part it was chosen on."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Recommendation:
    """The setting that would be chosen, on the first part of the record alone.

    `replay` is an index into the audit's replays, None when nothing can be recommended; `nearest` is then the setting
    with the fewest objections.
    """

    replay: int | None
    reasons: tuple[str, ...]
    nearest: int | None = None


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Verdict:
    """`decision` is "switch", "keep" or "undecided"; reasons carry their numbers."""

    decision: str
    reasons: tuple[str, ...]
    cautions: tuple[str, ...]


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
        return Recommendation(replay=None, reasons=_why_none(case, seen), nearest=_nearest(case, seen))
    if roomy:
        chosen = min(roomy, key=lambda i: (case.replays[i].first.updates, case.replays[i].first.rms_error, i))
    else:
        # Without reserve anywhere, the setting with the smallest error is the one most likely to hold.
        chosen = min(pool, key=lambda i: (case.replays[i].first.rms_error, case.replays[i].first.updates, i))
    return Recommendation(replay=chosen, reasons=_why_chosen(case, chosen, seen[chosen], reserve=bool(roomy)))


def _why_chosen(case: Case, chosen: int, found: Objections, *, reserve: bool) -> tuple[str, ...]:
    replay = case.replays[chosen]
    unit = case.loop.signals.measurement.unit
    facts = f"{percent(replay.first.saved_fraction)} saved, RMS error {number(replay.first.rms_error)} {unit}"
    link = replay.setting.link
    first = "On the first part of the record"
    if found.straddles:
        why = f"{first} nothing certain speaks against it ({facts}), but: {'; '.join(found.straddles)}."
    elif reserve:
        why = (
            f"{first} it has the fewest updates of all settings on the {link} link that keep what is asked for with "
            f"{percent(1 - RESERVE)} of the accepted error in reserve: {facts}."
        )
    else:
        why = (
            f"{first} it has the smallest error of the settings on the {link} link that keep what is asked for; none "
            f"leaves {percent(1 - RESERVE)} of the accepted error in reserve: {facts}."
        )
    return (why, *_other_link(case))


def _other_link(case: Case) -> tuple[str, ...]:
    """Say that rules on the link to the actuator were replayed and not chosen from."""
    links = {r.setting.link for r in case.replays if r.setting.rule != "periodic"}
    if links != {"sensor", "actuator"}:
        return ()
    return (
        "Rules on the link to the actuator (actuator-deadband) were replayed beside and not chosen from: they need a "
        "controller beside the sensor that sees every sample. Ask for them alone under [[rules]] to have them decided "
        "on.",
    )


def _why_none(case: Case, seen: dict[int, Objections]) -> tuple[str, ...]:
    if not seen:
        return ("No event rule was answerable from this log.",)
    nearest = _nearest(case, seen)
    assert nearest is not None
    many = f"None of the {len(seen)} settings that the log can answer keeps"
    one = "The only setting that the log can answer does not keep"
    return (
        f"{one if len(seen) == 1 else many} what is asked for on the first part of the record.",
        f"The nearest is {setting_label(case, nearest)}: {'; '.join(seen[nearest].fails)}.",
        *_other_link(case),
    )


def _nearest(case: Case, seen: dict[int, Objections]) -> int | None:
    """The setting with the fewest objections on the first part, then the fewest updates."""
    return min(seen, key=lambda i: (len(seen[i].fails), case.replays[i].first.updates, i), default=None)


def setting_label(case: Case, index: int) -> str:
    """Name a setting in one line, with units."""
    replay, signals = case.replays[index], case.loop.signals
    watched = signals.actuator.unit if replay.setting.link == "actuator" else signals.measurement.unit
    units = {"measurement": watched, "measurement·s": f"{watched}·s", "command": watched}
    specs = {spec.name: spec.unit for spec in get_rule(replay.setting.rule).settings}
    values = ", ".join(
        f"{name.removesuffix('_s')} {number(value)} {units.get(specs[name], specs[name])}".rstrip()
        for name, value in replay.setting.values.items()
    )
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
    outside = case.baseline.outside_limits_s if case.baseline is not None else None
    if outside is not None and outside > OUTSIDE * case.hours * 3600.0:
        share = percent(outside / (case.hours * 3600.0))
        reasons.append(
            f"The record itself is outside the stated limits {share} of the time: check [limits] and the units before "
            "anything is decided."
        )
    if case.model is not None and case.hours < case.loop.accept.min_hours:
        reasons.append(
            f"{number(case.hours)} h can be counted after the warm-up; {number(case.loop.accept.min_hours)} h are "
            f"asked for: at least {number(case.loop.accept.min_hours - case.hours)} h more are needed."
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
    label = setting_label(case, chosen)
    if fails:
        return "keep", (f"The best setting, {label}, does not hold.", *fails, *straddles)
    if straddles:
        return "undecided", (f"The best setting, {label}, cannot be decided on.", *straddles, case.experiment)
    return "switch", _why_switch(case, chosen)


def _why_switch(case: Case, chosen: int) -> tuple[str, ...]:
    replay = case.replays[chosen]
    unit = case.loop.signals.measurement.unit
    low, high = replay.interval90["rms_error"]
    record = case.baseline.rms_error if case.baseline is not None else math.nan
    reasons = [
        f"{setting_label(case, chosen)} would have saved {percent(replay.measures.saved_fraction)} of the updates over "
        f"{number(case.hours)} h ({percent(replay.first.saved_fraction)} on the part it was chosen on, "
        f"{percent(replay.rest.saved_fraction)} on the rest).",
        f"Its RMS error is {number(replay.measures.rms_error)} {unit} (90 % interval {number(low)}…{number(high)}); "
        f"the record's is {number(record)} {unit}, and at most {number(case.max_rms)} {unit} is accepted.",
    ]
    if replay.periodic_rms_error is None:
        reasons.append("No slowed-down clock with no more updates would have been stable.")
    else:
        reasons.append(
            f"The best slowed-down clock with no more updates has {number(replay.periodic_rms_error)} {unit}."
        )
    reasons.append("No danger flag stands on either part.")
    if replay.setting.link == "actuator":
        reasons.append("It saves messages to the actuator only: the controller must sit beside the sensor.")
    return tuple(reasons)
