"""The time of every row on UTC: local stamps need the zone of the clock that wrote them."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from auditor.arrays import BoolArray, IntArray
from auditor.errors import LogError, Problem, raise_all
from auditor.logs.findings.base import Finding
from auditor.logs.local_clock import find_zone, to_utc
from auditor.logs.parts import Part, at, joined, problem_at
from auditor.logs.timestamps import ends_a_month
from auditor.loop import LogSource

_LEAP = ("23:59:60 UTC on the last day of a month", "correct the stamps that name second 60")


def on_utc(parts: Sequence[Part], source: LogSource) -> tuple[IntArray, str, tuple[Finding, ...]]:
    """Join the time columns and put local stamps on UTC.

    Parameters
    ----------
    parts : sequence of Part
        The files in order.
    source : LogSource

    Returns
    -------
    time : ndarray of int64, shape (rows,)
        Nanoseconds since 1970 UTC.
    zone : str
        The clock the log was written by.
    findings : tuple of Finding

    Raises
    ------
    LogError
        When stamps are local and no zone is stated, when a local time does not exist or its pass cannot be told, or
        when a second 60 stands where no leap second can be.
    """
    time = joined([part.stamps.nanoseconds for part in parts])
    local = joined([part.stamps.local for part in parts])
    leap = joined([part.stamps.leap for part in parts])
    findings: tuple[Finding, ...] = ()
    problems: list[Problem] = []
    if local.any():
        if source.timezone is None:
            raise LogError(_no_zone(parts, local))
        rows = np.flatnonzero(local)
        placed = to_utc(time[rows], find_zone(source.timezone), source.ambiguous or "order")
        time = placed.utc if local.all() else _replaced(time, rows, placed.utc)
        problems += _clock_problems(parts, rows[placed.missing], rows[placed.tangled], source.timezone)
        findings = _one_pass(time[rows[placed.assumed]])
    leaps = np.flatnonzero(leap)
    wrong_leaps = leaps[~ends_a_month(time[leaps])]
    problems += problem_at(parts, wrong_leaps, "A second 60 stands where no leap second can be.", *_LEAP)
    raise_all(LogError, problems)
    return time, source.timezone if local.any() and source.timezone else "UTC", findings


def _replaced(time: IntArray, rows: IntArray, values: IntArray) -> IntArray:
    time = time.copy()
    time[rows] = values
    return time


def _no_zone(parts: Sequence[Part], local: BoolArray) -> Problem:
    where, stamp = at(parts, int(np.argmax(local)))
    return Problem(
        what="The time stamps are local, and no time zone is stated.",
        where=where,
        found=f'"{stamp}", without an offset from UTC',
        expected="timezone in [log]: the zone of the clock that wrote the log",
        do='add to [log] a line like timezone = "Europe/Amsterdam", or timezone = "UTC"',
    )


def _clock_problems(parts: Sequence[Part], missing: IntArray, tangled: IntArray, zone: str) -> list[Problem]:
    skipped = f"A local time does not exist: clocks in {zone} skipped it."
    no_order = "The order of the rows does not tell the first pass of the repeated hour from the second."
    return [
        *problem_at(
            parts,
            missing,
            skipped,
            f"stamps of a clock that follows {zone}",
            'name the zone the clock follows; one without summer time is timezone = "Etc/GMT-1" for UTC+1',
        ),
        *problem_at(
            parts,
            tangled,
            no_order,
            "stamps that step back once",
            'set ambiguous = "first" or "second" in [log], or export the log in UTC',
        ),
    ]


def _one_pass(times: IntArray) -> tuple[Finding, ...]:
    if not len(times):
        return ()
    detail = "one pass only of an hour that the local clock repeats"
    effect = "taken for the pass that its neighbours join, the first where neither does; ambiguous in [log] decides"
    start, end = int(times.min()), int(times.max())
    return (Finding(kind="repeated-hour", start=start, end=end, count=len(times), detail=detail, effect=effect),)
