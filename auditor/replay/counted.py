"""What the measures cover: spans less their warm-up, cut into the part a setting is chosen on and the rest."""

from __future__ import annotations

import math
from collections.abc import Sequence
from datetime import UTC, datetime

from auditor.logs.record import Record, Span

CHOSEN_SHARE = 0.6
"""A setting is chosen on the first 60 % of the counted time and judged on the rest (method, §6)."""

WARM_UP_TIME_CONSTANTS = 10.0

LONG_LOG_S = 61 * 86_400.0
"""Logs longer than this (about two months) are also given per calendar month."""


def counted_spans(record: Record, tau_cl_s: float, longest_silence_s: float) -> tuple[Span, ...]:
    """Return the spans less warm-up; a span of which the warm-up is more than half is left out (method, §1).

    Parameters
    ----------
    tau_cl_s : float
        Closed-loop time constant of the recorded loop [s].
    longest_silence_s : float
        Longest `max_silence` asked for by any setting [s].
    """
    warm = math.ceil(max(WARM_UP_TIME_CONSTANTS * tau_cl_s, longest_silence_s) / record.period)
    return tuple(Span(s.start + warm, s.stop) for s in record.spans if 2 * warm <= len(s) and warm < len(s))


def split(counted: Sequence[Span], share: float = CHOSEN_SHARE) -> tuple[tuple[Span, ...], tuple[Span, ...]]:
    """Cut the counted samples in time: the first `share` of them, and the rest."""
    left = round(share * sum(len(s) for s in counted))
    first: list[Span] = []
    rest: list[Span] = []
    for span in counted:
        take = min(left, len(span))
        left -= take
        if take:
            first.append(Span(span.start, span.start + take))
        if take < len(span):
            rest.append(Span(span.start + take, span.stop))
    return tuple(first), tuple(rest)


def by_month(record: Record, counted: Sequence[Span]) -> tuple[tuple[str, tuple[Span, ...]], ...]:
    """Cut the counted samples at calendar months (UTC); empty for logs of up to about two months."""
    if len(record) * record.period <= LONG_LOG_S or not counted:
        return ()
    edges = _month_edges(record)
    months = []
    for name, start, stop in edges:
        inside = [Span(max(s.start, start), min(s.stop, stop)) for s in counted if s.start < stop and s.stop > start]
        if inside:
            months.append((name, tuple(inside)))
    return tuple(months)


def _month_edges(record: Record) -> list[tuple[str, int, int]]:
    """(name, first sample, first sample of the next month) for every month the record touches."""
    at = datetime.fromtimestamp(record.start / 1e9, UTC).replace(day=1, hour=0, minute=0, second=0, microsecond=0)
    edges = []
    start = 0
    while start < len(record):
        after = at.replace(year=at.year + at.month // 12, month=at.month % 12 + 1)
        stop = math.ceil((after.timestamp() - record.start / 1e9) / record.period)
        edges.append((at.strftime("%Y-%m"), start, min(stop, len(record))))
        at, start = after, stop
    return edges


def samples(spans: Sequence[Span]) -> int:
    """Number of samples in the spans."""
    return sum(len(s) for s in spans)
