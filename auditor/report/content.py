"""What the report says, without layout: which replays it talks about, what it compares, what it leaves out."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from auditor.audit import SHOWN_DANGERS, Audit
from auditor.dangers.interval import Flag, covered_samples
from auditor.objections import accepted_rms_error
from auditor.replay import Measures, Replay

SHOWN_FLAGS = 60


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Option:
    """One column of the decision table.

    Attributes
    ----------
    role : str
        "recommended", "best candidate", "runner-up", "slowed-down clock" or "present clock".
    index : int or None
        Index into the audit's replays, None for the record itself.
    measures, first, rest : Measures
        Over the whole counted record, its first 60 %, and the rest.
    """

    role: str
    index: int | None
    replay: Replay | None
    measures: Measures
    first: Measures | None
    rest: Measures | None


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class FlagCount:
    """Flags of one replay by severity, and the time they cover [s]."""

    watch: int = 0
    danger: int = 0
    flagged_s: float = 0.0


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Content:
    """The facts of a report.

    Attributes
    ----------
    focus : int or None
        The replay the pages are about: the recommended one, else the best candidate, None without any answer.
    recommended : bool
        True when the verdict is to switch to `focus`; otherwise it is a candidate.
    options : tuple of Option
        The decision table.
    shown : tuple of int
        Replays whose flags and series are shown, `focus` first.
    hidden : int
        Further replays with danger flags that are not shown.
    flags : tuple of Flag
        The flags the table shows, those of `focus` first, then most severe first; `flags_left_out` more belong to
        the shown replays.
    counts : tuple of FlagCount
        One per replay.
    max_rms_error : float or None
        Largest RMS error accepted [measurement unit]; `rms_assumed` when the loop file does not state it.
    """

    audit: Audit
    focus: int | None
    recommended: bool
    options: tuple[Option, ...]
    shown: tuple[int, ...]
    hidden: int
    flags: tuple[Flag, ...]
    flags_left_out: int
    counts: tuple[FlagCount, ...]
    max_rms_error: float | None
    rms_assumed: bool

    @property
    def replay(self) -> Replay | None:
        """The replay the pages are about."""
        return None if self.focus is None else self.audit.replays[self.focus]


def gather(audit: Audit) -> Content:
    """Choose what a report of `audit` says."""
    focus = focus_of(audit)
    counts = flag_counts(audit)
    shown, hidden = _shown(audit, focus, counts)
    flags = sorted((f for f in audit.flags if f.replay in shown), key=lambda f: _weight(f, focus))
    return Content(
        audit=audit,
        focus=focus,
        recommended=is_recommended(audit),
        options=_options(audit, focus, counts),
        shown=shown,
        hidden=hidden,
        flags=tuple(flags[:SHOWN_FLAGS]),
        flags_left_out=max(0, len(flags) - SHOWN_FLAGS),
        counts=counts,
        max_rms_error=accepted_rms_error(audit.loop, audit.baseline),
        rms_assumed=audit.loop.accept.max_rms_error is None,
    )


def is_recommended(audit: Audit) -> bool:
    """True when the verdict is to switch; a setting that was chosen but does not hold is a candidate only."""
    return audit.recommendation.replay is not None and audit.verdict.decision == "switch"


def focus_of(audit: Audit) -> int | None:
    """Index of the replay the audit chose, else of the nearest or the best one, None when nothing was answered."""
    chosen = audit.recommendation
    if chosen.replay is not None or chosen.nearest is not None:
        return chosen.replay if chosen.replay is not None else chosen.nearest
    candidates = _answered(audit, lambda replay: replay.setting.rule != "periodic")
    return _best(audit, candidates)


def flag_counts(audit: Audit) -> tuple[FlagCount, ...]:
    """Flags of every replay by severity, and the time under at least one of them."""
    by_replay: dict[int, list[Flag]] = {}
    for flag in audit.flags:
        by_replay.setdefault(flag.replay, []).append(flag)
    return tuple(count_flags(by_replay.get(i, []), audit.record.period) for i in range(len(audit.replays)))


def count_flags(flags: Sequence[Flag], period: float) -> FlagCount:
    """Count the flags of one replay by severity; `period` is the base period [s]."""
    return FlagCount(
        watch=sum(flag.severity == "watch" for flag in flags),
        danger=sum(flag.severity == "danger" for flag in flags),
        flagged_s=covered_samples(flags) * period,
    )


def curve_key(replay: Replay) -> tuple[str, str, str, str]:
    """What makes replays one curve of the trade-off picture."""
    setting = replay.setting
    return setting.rule, setting.link, setting.signal, setting.between


def _weight(flag: Flag, focus: int | None) -> tuple[bool, bool, float, int]:
    return flag.replay != focus, flag.severity != "danger", -flag.values.get("share", 0.0), flag.start


def _answered(audit: Audit, wanted: Callable[[Replay], bool]) -> list[int]:
    return [i for i, replay in enumerate(audit.replays) if replay.answerable and wanted(replay)]


def upper_rms_error(replay: Replay) -> float:
    """Upper end of the 90 % interval of the RMS error, infinite when it is not known."""
    upper = replay.interval90.get("rms_error", (np.nan, np.nan))[1]
    return float(upper) if np.isfinite(upper) else np.inf


def _best(audit: Audit, candidates: Iterable[int]) -> int | None:
    """Most saved within the accepted error; when none is within it, the smallest error that saves enough."""
    limit = accepted_rms_error(audit.loop, audit.baseline) or np.inf
    wanted = audit.loop.accept.min_saved_fraction

    def rank(i: int) -> tuple[bool, bool, float]:
        replay = audit.replays[i]
        saved, upper = replay.measures.saved_fraction, upper_rms_error(replay)
        within = upper <= limit
        return not within, not within and saved < wanted, -saved if within else upper

    return min(candidates, key=rank, default=None)


def _shown(audit: Audit, focus: int | None, counts: Sequence[FlagCount]) -> tuple[tuple[int, ...], int]:
    """The replay the pages are about, then answered ones with danger flags: those with signals, fewest updates."""
    dangerous = [i for i in _answered(audit, lambda replay: True) if counts[i].danger and i != focus]
    dangerous.sort(key=lambda i: (audit.replays[i].series is None, audit.replays[i].measures.updates, i))
    first = () if focus is None else (focus,)
    return (*first, *dangerous[:SHOWN_DANGERS]), max(0, len(dangerous) - SHOWN_DANGERS)


def _options(audit: Audit, focus: int | None, counts: Sequence[FlagCount]) -> tuple[Option, ...]:
    listed: list[Option] = []
    if focus is not None:
        role = "recommended" if is_recommended(audit) else "best candidate"
        listed.append(_option(role, focus, audit))
        listed += [_option("runner-up", i, audit) for i in _runner_up(audit, focus, counts)]
    if audit.baseline is not None:
        listed.append(
            Option(
                role="present clock",
                index=None,
                replay=None,
                measures=audit.baseline,
                first=audit.baseline_first,
                rest=audit.baseline_rest,
            )
        )
    if focus is not None:
        listed += [_option("slowed-down clock", i, audit) for i in _slowed_clock(audit, focus)]
    return tuple(listed)


def _option(role: str, index: int, audit: Audit) -> Option:
    replay = audit.replays[index]
    measures, first, rest = replay.measures, replay.first, replay.rest
    return Option(role=role, index=index, replay=replay, measures=measures, first=first, rest=rest)


def _runner_up(audit: Audit, focus: int, counts: Sequence[FlagCount]) -> list[int]:
    """The best setting of another rule, without danger flags where there is one."""
    taken = curve_key(audit.replays[focus])
    others = _answered(audit, lambda r: r.setting.rule != "periodic" and curve_key(r) != taken)
    calm = [i for i in others if not counts[i].danger]
    best = _best(audit, calm or others)
    return [] if best is None else [best]


def _slowed_clock(audit: Audit, focus: int) -> list[int]:
    """The replayed clock with the smallest error among those that use no more updates."""
    budget = audit.replays[focus].measures.updates
    clocks = _answered(audit, lambda r: r.setting.rule == "periodic" and r.measures.updates <= budget)
    return [min(clocks, key=lambda i: audit.replays[i].measures.rms_error)] if clocks else []
