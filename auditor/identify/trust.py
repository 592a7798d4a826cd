"""How far an identified loop may be trusted, with reasons a field engineer understands (method, §5.4).

Whiteness, cross-correlation and hold-out do not see the dangerous failures; the width of each answer's own interval
does, and is judged replay by replay elsewhere. What is judged here is what the log as a whole cannot carry.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from auditor.controllers.pid import Pid
from auditor.identify import thresholds
from auditor.identify.plant import Plant
from auditor.logs.record import Record
from auditor.text import number, percent

SHORT_LOG = 5_000
"""Samples below which answers are limited: errors on loops with known truth were then 4 % on counts at the 90th
percentile instead of 2 %, and intervals too narrow."""

UNDERDAMPED = 0.6
"""Damping ratio below which a plant counts as underdamped: such plants are answered with errors of 30 % at the 90th
percentile, and intervals do not hold."""

QUICK_PLANT_DELAY = 2
"""Samples of delay up to which a single-lag plant cannot be told apart from its controller in pure regulation."""

PEAK = (1.15, 3.0)
"""Peak sensitivity of a loop that people run on purpose; outside, the model is doubtful."""

_RANK = {"good": 2, "limited": 1, "none": 0}


@dataclass(frozen=True, slots=True, kw_only=True)
class Evidence:
    """What the trust is judged from."""

    record: Record
    controller: Pid
    plants: Sequence[Plant]
    best: int
    null_replay: float
    explained_by_error: float
    causes: tuple[str, ...]
    peak_sensitivity: float
    pure_regulation: bool
    dropped: int


def judge(seen: Evidence) -> tuple[str, tuple[str, ...]]:
    """Return trust and reasons; every reason below "good" is told."""
    checks = (
        _null(seen),
        _length(seen),
        _damping(seen),
        _derivative(seen),
        _quick_plant(seen),
        _sensitivity(seen),
        _unstable_draws(seen),
    )
    told = [c for c in checks if c is not None]
    if not told:
        return "good", ("The controller returns the record and nothing in the log stands against the model.",)
    worst = min((level for level, _ in told), key=_RANK.__getitem__)
    return worst, tuple(reason for _, reason in told)


def _null(seen: Evidence) -> tuple[str, str] | None:
    null = seen.null_replay
    if null <= thresholds.NULL_GOOD:
        return None
    why = ("; ".join(seen.causes) + ".") if seen.causes else ""
    shown = (
        f"Replaying the clock itself misses the record by {percent(null, 1)} of the error's deviation. {why}".strip()
    )
    if null < thresholds.NULL_LIMIT:
        return "limited", shown
    if seen.explained_by_error >= thresholds.EXPLAINED_SHARE:
        share = percent(seen.explained_by_error)
        return "limited", f"{shown} {share} of what the controller does not explain has a known origin and is replayed."
    return "none", f"{shown} From {percent(thresholds.NULL_LIMIT)} on the answer would be about another controller."


def _length(seen: Evidence) -> tuple[str, str] | None:
    samples = int(seen.record.in_span.sum())
    if samples >= SHORT_LOG:
        return None
    return "limited", f"Only {samples:,} usable samples; {SHORT_LOG:,} are needed for intervals that hold."


def _damping(seen: Evidence) -> tuple[str, str] | None:
    swinging = [p for p in seen.plants if p.damping is not None and p.damping < UNDERDAMPED]
    share = len(swinging) / len(seen.plants)
    if share < 0.5:
        return None
    text = (
        f"The plant itself swings (damping {number(swinging[0].damping, 2)} or so under {percent(share)} of the likely "
        "plants); intervals do not hold for such plants."
    )
    if seen.pure_regulation:
        return "none", f"{text} State the plant type under [loop] and make one setpoint step."
    return "limited", text


def _derivative(seen: Evidence) -> tuple[str, str] | None:
    if seen.controller.derivative_time == 0.0:
        return None
    double = sum(len(p.time_constants_s) >= 2 for p in seen.plants) / len(seen.plants)
    if double < 0.5:
        return None
    return "limited", "Derivative action on a plant with two or more lags: intervals are too narrow for such loops."


def _quick_plant(seen: Evidence) -> tuple[str, str] | None:
    plant = seen.plants[seen.best]
    quick = plant.order == 1 and plant.delay_s <= QUICK_PLANT_DELAY * seen.record.period
    if not (quick and seen.pure_regulation):
        return None
    return "limited", "A single-lag plant with hardly any dead time, and no setpoint move in the log to show it."


def _sensitivity(seen: Evidence) -> tuple[str, str] | None:
    if PEAK[0] <= seen.peak_sensitivity <= PEAK[1]:
        return None
    return "limited", (
        f"The loop's peak sensitivity would be {number(seen.peak_sensitivity)}; loops in service lie within "
        f"{PEAK[0]}…{PEAK[1]}."
    )


def _unstable_draws(seen: Evidence) -> tuple[str, str] | None:
    total = len(seen.plants) + seen.dropped
    if 2 * seen.dropped < total:
        return None
    return (
        "limited",
        f"{seen.dropped} of {total} likely plants were dropped: the recorded loop would be unstable under them.",
    )
