"""A log whose rows come at one spacing for a while and at another one later."""

from __future__ import annotations

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import moment, plural
from auditor.text import duration

_ROWS = 20
_SAME = 0.05
_OTHER = 0.2
_MOSTLY = 0.8


def spacing_changes(stamps: IntArray) -> tuple[IntArray, FloatArray]:
    """Return where the spacing of the stamps changes for twenty rows or more, and the spacings between the changes.

    Blocks of twenty rows say their median spacing where most of the block keeps it; a missing row or a gap does not
    move a median. Between two blocks of different spacing the change is put where most rows agree with their side.

    Parameters
    ----------
    stamps : ndarray of int64, shape (n,)
        Ascending [ns].

    Returns
    -------
    at : ndarray of int64, shape (C,)
        The last stamp before each change.
    steps : ndarray, shape (C + 1,), [s]
        Empty where no block keeps a spacing.
    """
    spacing = np.diff(stamps) / 1e9
    count = len(spacing) // _ROWS
    blocks = spacing[: count * _ROWS].reshape(count, _ROWS)
    usual = np.median(blocks, axis=1)
    kept = np.flatnonzero(np.mean(np.abs(blocks - usual[:, None]) <= _SAME * usual[:, None], axis=1) >= _MOSTLY)
    usual = usual[kept]
    if len(kept) == 0:
        return np.empty(0, dtype=np.int64), np.empty(0)
    changed = np.flatnonzero(np.abs(np.log(usual[1:] / usual[:-1])) > np.log(1 + _OTHER))
    at = [
        _split(spacing, int(kept[i]) * _ROWS, (int(kept[i + 1]) + 1) * _ROWS, float(usual[i]), float(usual[i + 1]))
        for i in changed
    ]
    return np.array(at, dtype=np.int64), usual[np.append(changed, len(usual) - 1)]


def _split(spacing: FloatArray, start: int, stop: int, before: float, after: float) -> int:
    """Return the stamp between `start` and `stop` that most spacings agree with as the change."""
    part = np.log(spacing[start:stop])
    nearer_before = np.abs(part - np.log(before)) < np.abs(part - np.log(after))
    return start + int(np.argmax(np.concatenate(([0], np.cumsum(np.where(nearer_before, 1, -1))))))


def find(seen: Evidence) -> list[Finding]:
    """Report changes of the log's own step; values stored on change have none."""
    if seen.trace("measurement").stored == "on-change":
        return []
    at, steps = spacing_changes(seen.beats)
    if len(at) == 0:
        return []
    distinct: list[float] = []
    for step in steps.tolist():
        if all(abs(step / other - 1) > _SAME for other in distinct):
            distinct.append(step)
    told = ", then ".join(duration(step) for step in distinct[:4]) + (" …" if len(distinct) > 4 else "")
    window = max(seen.period, seen.log_step)
    slower = max(distinct) > window * (1 + _OTHER)
    return [
        Finding(
            kind="mixed-period",
            start=int(seen.beats[at[0]]),
            end=int(seen.beats[at[-1]]),
            count=len(at),
            detail=f"the spacing of the rows changes {plural(len(at), 'time')}, first at "
            f"{moment(int(seen.beats[at[0]]))}: {told}",
            effect="one grid for all: the last row at or before each instant is used"
            + (f", none is held longer than {duration(window)}, so that slower stretches have holes" if slower else "")
            + "; audit the stretches one by one",
            weight="limits the answer",
        )
    ]
