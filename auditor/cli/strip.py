"""The record as one line of characters: where it may be used, where not, and why not."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from auditor.cli.screen import WIDTH
from auditor.text import duration, percent

if TYPE_CHECKING:
    from auditor.arrays import BoolArray
    from auditor.logs.record import Record
    from auditor.report.times import LocalClock

COLUMNS = 72
USABLE, PARTLY, UNUSABLE = "█", "▒", "░"
SHOWN = 2
"""Stretches named per cause, the longest first."""


@dataclass(frozen=True, slots=True)
class Stretch:
    """Samples start…stop−1, all unusable for one cause."""

    cause: str
    start: int
    stop: int

    def __len__(self) -> int:
        return self.stop - self.start


def time_strip(record: Record) -> str:
    """Draw the record along time, 72 characters wide, and name the longest stretches that cannot be used by cause.

    A character is "usable" or "not usable" when all of its samples are, and "partly" otherwise, so that a stretch
    shorter than a character still shows.
    """
    from auditor.report.times import local_clock

    clock = local_clock(record.zone, record.period)
    parts = [_bar(record.in_span), _ends(record, clock), _legend(record)]
    return "\n".join([*parts, *_causes(record, clock)])


def _bar(usable: BoolArray) -> str:
    """One character per 72nd of the record; fewer where there are fewer samples."""
    count = min(COLUMNS, len(usable))
    edges = np.linspace(0, len(usable), count + 1).astype(np.int64)
    shares = [float(np.mean(usable[a:b])) for a, b in pairwise(edges)]
    return "".join(USABLE if share == 1.0 else UNUSABLE if share == 0.0 else PARTLY for share in shares)


def _ends(record: Record, clock: LocalClock) -> str:
    """First and last time under the ends of the strip; one under the other where they do not fit."""
    first, last = (clock.moment(int(record.time_ns(k))) for k in (0, max(0, len(record) - 1)))
    width = min(COLUMNS, len(record))
    room = width - len(first) - len(last)
    line = first + " " * room + last if room > 0 else f"{first}\n{last}"
    return f"{line}\n(times in {clock.name})"


def _legend(record: Record) -> str:
    words = [f"{USABLE} usable"]
    if not record.in_span.all():
        each = duration(len(record) / min(COLUMNS, len(record)) * record.period)
        words += [f"{PARTLY} partly", f"{UNUSABLE} not usable", f"{each} per character"]
    return "   ".join(words)


def _causes(record: Record, clock: LocalClock) -> list[str]:
    """One paragraph per cause, the one that takes most first."""
    by_cause: dict[str, list[Stretch]] = {}
    for stretch in stretches(record):
        by_cause.setdefault(stretch.cause, []).append(stretch)
    ranked = sorted(by_cause.items(), key=lambda item: (-sum(map(len, item[1])), item[0]))
    return [line for cause, found in ranked for line in _told(cause, found, record, clock)]


def _told(cause: str, found: list[Stretch], record: Record, clock: LocalClock) -> list[str]:
    total = sum(map(len, found))
    worst = sorted(found, key=lambda s: (-len(s), s.start))[:SHOWN]
    many = f"{len(found)} stretches" if len(found) > 1 else "1 stretch"
    head = f"{cause}: {many}, {duration(total * record.period)} ({percent(total / len(record), 1)})"
    if len(found) > len(worst):
        head += "; the longest:"
    lines = [head]
    for s in worst:
        start, end = (clock.moment(int(record.time_ns(k))) for k in (s.start, s.stop - 1))
        lines.append(f"  {start} to {end}, {duration(len(s) * record.period)}"[:WIDTH])
    return lines


def stretches(record: Record) -> list[Stretch]:
    """The stretches outside all spans, in order of time, cut where the cause changes.

    Valid samples outside every span lie in a stretch too short to be replayed: their cause is "short span". An
    unusable sample without a recorded cause is a gap.
    """
    from auditor.logs.record import CAUSES

    cause = np.where(record.valid, 0, 1) if record.cause is None else np.asarray(record.cause, dtype=np.int64)
    code = np.where(record.in_span, -1, cause)
    edges = [0, *(np.flatnonzero(np.diff(code)) + 1).tolist(), len(code)]
    names = ("short span", *CAUSES[1:])
    return [Stretch(names[code[a]], a, b) for a, b in pairwise(edges) if a < b and code[a] >= 0]
