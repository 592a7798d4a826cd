"""The clock of the log jumps by a part of its own spacing and stays there."""

from __future__ import annotations

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import moment, plural
from auditor.logs.runs import thinned
from auditor.text import duration

_LEAST = 0.05
_ROWS = 20
_MOST = 1000
_ABOVE_JITTER = 6.0
_MAD_PER_DEVIATION = 1.4826


def clock_steps(unevenness: FloatArray) -> tuple[IntArray, FloatArray]:
    """Return where the phase of the stamps changes for good, and by how much.

    Parameters
    ----------
    unevenness : ndarray, shape (B − 1,)
        Distance of neighbouring stamps less the nearest multiple of their spacing [spacing].

    Returns
    -------
    at : ndarray of int64
        Index of the last stamp before each step.
    size : ndarray
        Change of phase [spacing].
    """
    none = np.empty(0, dtype=np.int64), np.empty(0)
    some = thinned(unevenness)
    spread = _MAD_PER_DEVIATION * float(np.median(np.abs(some - np.median(some))))
    least = max(_LEAST, _ABOVE_JITTER * spread)
    at = np.flatnonzero(np.abs(unevenness) > least)
    if len(at) == 0 or len(at) > _MOST or len(unevenness) < 2 * _ROWS:
        return none
    before, after = _phase(unevenness, at, -1), _phase(unevenness, at, +1)
    size = after - before
    size -= np.rint(size)
    lasting = (np.abs(size) > least) & (at >= _ROWS) & (at < len(unevenness) - _ROWS)
    return at[lasting], size[lasting]


def _phase(unevenness: FloatArray, at: IntArray, direction: int) -> FloatArray:
    """Return the median phase of the stamps before (−1) or after (+1) a place, against the stamp just before it.

    A late row lifts the phase of one stamp only, which the median does not see.
    """
    phase = np.cumsum(unevenness)
    offsets = np.arange(1, _ROWS + 1) if direction > 0 else np.arange(-_ROWS, 0)
    around = phase[np.clip(at[:, None] + offsets[None, :] - (direction > 0), 0, len(phase) - 1)]
    return np.asarray(np.median(around, axis=1))


def find(seen: Evidence) -> list[Finding]:
    """Report lasting jumps of the clock's phase."""
    if not seen.regular:
        return []
    at, size = clock_steps(seen.unevenness)
    if len(at) == 0:
        return []
    largest = int(np.argmax(np.abs(size)))
    return [
        Finding(
            kind="clock-step",
            start=int(seen.beats[at[0]]),
            end=int(seen.beats[at[-1] + 1]),
            count=len(at),
            detail=f"the stamps are offset for good {plural(len(at), 'time')}, at most by "
            f"{duration(abs(float(size[largest])) * seen.unit)} after {moment(int(seen.beats[at[largest]]))}",
            effect="the grid stays; stamps up to a quarter of a period behind an instant are snapped to it, "
            "later ones count for the next",
        )
    ]
