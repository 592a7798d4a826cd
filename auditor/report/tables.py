"""The report's tables in words and numbers; where they stand on a page is the template's business."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from auditor.dangers.interval import Flag
from auditor.logs.findings.base import Finding
from auditor.replay import Measures
from auditor.report.content import Content, FlagCount, Option, curve_key
from auditor.report.phrases import CAUSES, clean, measured, rule_title, settings_text, whole
from auditor.report.times import LocalClock
from auditor.text import duration, number, percent

Row = tuple[str, ...]


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Table:
    """A table of texts.

    Attributes
    ----------
    head : tuple of str
    numeric : frozenset of int
        Columns of numbers.
    groups : tuple of (str, tuple of Row)
        Rows under their heading; an empty heading stands for none. The last cell of a short row spans the rest.
    """

    head: Row
    numeric: frozenset[int]
    groups: tuple[tuple[str, tuple[Row, ...]], ...]

    @property
    def empty(self) -> bool:
        """True without rows."""
        return not any(rows for _, rows in self.groups)


def plain_table(head: Sequence[str], rows: Sequence[Row], numeric: Sequence[int] = ()) -> Table:
    """Return a table without groups."""
    return Table(head=tuple(head), numeric=frozenset(numeric), groups=(("", tuple(rows)),))


def with_unit(value: str, unit: str) -> str:
    """Append the unit to a value that is there."""
    return value if value == "–" or not unit else f"{value}\u00a0{unit}"


def seconds(value: float | None) -> str:
    """Write a duration, or a dash when it is not known."""
    return "–" if value is None or value != value else duration(value).replace(" ", "\u00a0")


def decision_table(content: Content) -> Table:
    """The recommended setting, its runner-up, the present clock and the slowed-down one, side by side."""
    head = ("", *(_option_head(content, option) for option in content.options))
    groups: tuple[tuple[str, tuple[Row, ...]], ...] = (
        ("over the whole counted record", _rows(content, _WHOLE)),
        ("on the first 60 %, where a setting is chosen", _part_rows(content, lambda option: option.first)),
        ("on the rest, where it is judged", _part_rows(content, lambda option: option.rest)),
    )
    if content.focus is not None:
        groups += (("how sure", _rows(content, _SURE)),)
    return Table(head=head, numeric=frozenset(range(1, len(head))), groups=groups)


def _option_head(content: Content, option: Option) -> str:
    if option.replay is None:
        return f"{option.role}\nevery sample ({duration(content.audit.loop.period)})"
    setting = option.replay.setting
    name = "" if setting.rule == "periodic" else f"{rule_title(setting)}, "
    return f"{option.role} (#{option.index})\n{name}{settings_text(setting, content.audit.loop)}"


def _interval(option: Option, name: str) -> str:
    value: float = getattr(option.measures, name)
    return measured(value, option.replay.interval90.get(name) if option.replay else None)


_Cell = Callable[[Content, Option], str]
_WHOLE: tuple[tuple[str, _Cell], ...] = (
    ("updates per hour", lambda c, o: number(o.measures.updates_per_hour)),
    ("updates saved", lambda c, o: percent(o.measures.saved_fraction)),
    ("updates [90 %]", lambda c, o: _interval(o, "updates")),
    ("busiest hour, updates", lambda c, o: number(o.measures.peak_updates_per_hour)),
    ("RMS error {unit} [90 %]", lambda c, o: _interval(o, "rms_error")),
    ("IAE per hour {unit·s} [90 %]", lambda c, o: _interval(o, "iae_per_hour")),
    ("largest error {unit} [90 %]", lambda c, o: _interval(o, "max_abs_error")),
    ("outside the band", lambda c, o: seconds(o.measures.outside_band_s)),
    ("outside the limits", lambda c, o: seconds(o.measures.outside_limits_s)),
    ("longest silence", lambda c, o: seconds(o.measures.max_gap_s)),
    ("median gap", lambda c, o: seconds(o.measures.median_gap_s)),
    ("actuator travel {actuator}", lambda c, o: number(o.measures.actuator_travel)),
    ("actuator at a limit", lambda c, o: seconds(o.measures.saturated_s)),
)
_SURE: tuple[tuple[str, _Cell], ...] = (
    ("against the clock at as many updates", lambda c, o: _against(o)),
    ("the same on the rest alone", lambda c, o: o.replay.against_periodic_rest if o.replay and _event(o) else "–"),
    ("RMS error less that of the clock {unit}, 90 %", lambda c, o: _difference(o)),
    ("count without a model", lambda c, o: number(o.replay.naive_updates) if o.replay else "–"),
    ("trust in the answer", lambda c, o: o.replay.trust if o.replay else "recorded"),
    ("flags", lambda c, o: "–" if o.index is None else flag_words(c.counts[o.index])),
)


def _against(option: Option) -> str:
    return option.replay.against_periodic if option.replay and _event(option) else "–"


def _event(option: Option) -> bool:
    """True for an event rule: a clock is not held against itself."""
    return option.replay is not None and option.replay.setting.rule != "periodic"


def _difference(option: Option) -> str:
    ends = option.replay.rms_difference90 if option.replay and _event(option) else None
    if ends is None:
        return "–"
    # Where the clock ran away under some likely plants there is no lower end.
    told = f"{number(ends[0])} … {number(ends[1])}" if math.isfinite(ends[0]) else f"below {number(ends[1])}"
    return told.replace("-", "\u2212")


def _rows(content: Content, lines: Sequence[tuple[str, _Cell]]) -> tuple[Row, ...]:
    return tuple((_units(content, name), *(cell(content, o) for o in content.options)) for name, cell in lines)


def _part_rows(content: Content, part: Callable[[Option], Measures | None]) -> tuple[Row, ...]:
    parts = [part(option) for option in content.options]

    def row(name: str, cell: Callable[[Measures], str]) -> Row:
        return (_units(content, name), *("–" if m is None else cell(m) for m in parts))

    return (
        row("hours", lambda m: number(m.hours)),
        row("updates per hour", lambda m: number(m.updates_per_hour)),
        row("updates saved", lambda m: percent(m.saved_fraction)),
        row("RMS error {unit}", lambda m: number(m.rms_error)),
        row("largest error {unit}", lambda m: number(m.max_abs_error)),
        row("longest silence", lambda m: seconds(m.max_gap_s)),
    )


def _units(content: Content, name: str) -> str:
    signals = content.audit.loop.signals
    unit, actuator = clean(signals.measurement.unit), clean(signals.actuator.unit)
    for mark, text in (("{unit·s}", f"{unit}·s" if unit else ""), ("{unit}", unit), ("{actuator}", actuator)):
        name = name.replace(mark, f"({text})" if text else "")
    return " ".join(name.split())


def flag_words(count: FlagCount) -> str:
    """Count flags by severity, in words."""
    parts = [f"{n} {word}" for n, word in ((count.danger, "danger"), (count.watch, "watch")) if n]
    return ", ".join(parts) or "none"


def replay_table(content: Content) -> Table:
    """Every replay, rule by rule."""
    head = ["#", "setting", "updates/h", "saved", "updates [90 %]", "count without model", "RMS error {unit} [90 %]"]
    head += ["longest silence", "against clock", "trust", "flags"]
    groups: dict[tuple[str, ...], list[int]] = {}
    for i, replay in enumerate(content.audit.replays):
        groups.setdefault(curve_key(replay), []).append(i)
    return Table(
        head=tuple(_units(content, name) for name in head),
        numeric=frozenset({0, 2, 3, 4, 5, 6, 7}),
        groups=tuple(_replay_group(content, members) for members in groups.values()),
    )


def _replay_group(content: Content, members: Sequence[int]) -> tuple[str, tuple[Row, ...]]:
    title = rule_title(content.audit.replays[members[0]].setting)
    return title, tuple(_replay_row(content, i) for i in members)


def _replay_row(content: Content, index: int) -> Row:
    replay = content.audit.replays[index]
    first = (str(index), settings_text(replay.setting, content.audit.loop))
    naive = number(replay.naive_updates)
    if not replay.answerable:
        told = f"not answered: {clean(replay.refusal or 'no reason')} (count without a model: {naive})"
        return (*first, told)
    m, ends = replay.measures, replay.interval90
    return (
        *first,
        number(m.updates_per_hour),
        percent(m.saved_fraction),
        measured(m.updates, ends.get("updates")),
        naive,
        measured(m.rms_error, ends.get("rms_error")),
        seconds(m.max_gap_s),
        "–" if replay.setting.rule == "periodic" else replay.against_periodic,
        replay.trust,
        flag_words(content.counts[index]),
    )


def flag_table(content: Content, clock: LocalClock) -> Table:
    """The shown flags: those of the setting the pages are about, then those of others, most severe first."""
    own = [flag for flag in content.flags if flag.replay == content.focus]
    others = [flag for flag in content.flags if flag.replay != content.focus]
    name = "the recommended setting" if content.recommended else "the best candidate"
    groups = [
        (title, tuple(_flag_row(content, clock, f) for f in flags)) for title, flags in ((name, own), (_OTHERS, others))
    ]
    return Table(
        head=("setting", f"start ({clock.name})", "for", "cause", "severity", "share of plants", "evidence"),
        numeric=frozenset({2, 5}),
        groups=tuple(group for group in groups if group[1]),
    )


_OTHERS = "other settings with danger flags"


def _flag_row(content: Content, clock: LocalClock, flag: Flag) -> Row:
    record, cause = content.audit.record, clean(flag.cause)
    return (
        f"#{flag.replay}",
        clock.moment(int(record.time_ns(flag.start))),
        seconds((flag.stop - flag.start) * record.period),
        f"{cause}: {CAUSES[flag.cause]}" if flag.cause in CAUSES else cause,
        flag.severity,
        percent(flag.values.get("share")),
        clean(flag.detail),
    )


def finding_table(content: Content, clock: LocalClock) -> Table:
    """Everything found in the log."""

    def moment(ns: int | None) -> str:
        return "whole log" if ns is None else clock.moment(ns)

    def row(f: Finding) -> Row:
        seen = (clean(f.kind), clean(f.signal) or "clock", moment(f.start), whole(f.count))
        return (*seen, clean(f.detail), clean(f.effect), f.weight)

    rows = [row(finding) for finding in content.audit.record.findings]
    head = ("finding", "signal", f"from ({clock.name})", "count", "what was seen", "what was done about it", "weight")
    return plain_table(head, rows, numeric=(3,))


def lost_hours_table(content: Content) -> Table:
    """Hours that could not be used, by cause."""
    lost = sorted(content.audit.record.lost_hours.items(), key=lambda item: (-item[1], item[0]))
    return plain_table(("cause", "hours"), [(clean(cause), number(hours)) for cause, hours in lost], numeric=(1,))


def period_table(content: Content) -> Table:
    """The setting the pages are about, month by month; empty for a short log."""
    periods = content.replay.by_period if content.replay else ()
    rows = [
        (
            clean(name),
            number(m.hours),
            number(m.updates_per_hour),
            percent(m.saved_fraction),
            number(m.rms_error),
            number(m.max_abs_error),
            seconds(m.max_gap_s),
        )
        for name, m in periods
    ]
    head = ("month", "hours", "updates/h", "saved", "RMS error {unit}", "largest error {unit}", "longest silence")
    return plain_table([_units(content, name) for name in head], rows, numeric=range(1, 7))
