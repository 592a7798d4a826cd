"""Archives that store a value only when it has moved by more than a dead-band: held values, and no small changes."""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.runs import thinned
from auditor.text import number, percent

_FEWEST = 20
_HELD = 0.05
_STRAY_CHANGES = 0.01
_HOLE = 0.05
_ABOVE_STEP = 1.5
_REGULAR_STORES = 0.05
_FEWEST_LEVELS = 10
_LAST_DIGIT = 1e-4


def archive_deadband(values: FloatArray, step: float | None) -> float | None:
    """Return the dead-band of the archive, None when the small changes are there.

    A signal stored at every sample has about as many changes between nought and c as between c and 2 c, for small
    c. An archive's dead-band leaves a hole instead, and held values in its place. Changes stored because the
    longest allowed time had passed may be of any size and are left out.

    Parameters
    ----------
    values : ndarray, shape (n,), [unit]
        Values in the order they were stored, held in between.
    step : float or None
        Step of the lattice the values lie on [unit]; changes of one step are no dead-band. A lattice finer than 1e-4
        of the values' deviation is not looked for, so that a dead-band that fine is the log's last digit.
    """
    finite = values[np.isfinite(values)]
    repeats = finite[1:] == finite[:-1]
    if np.sum(repeats) < max(_FEWEST, _HELD * len(repeats)):
        return None
    moved = np.flatnonzero(~repeats)
    if len(moved) < _FEWEST or len(np.unique(thinned(finite[moved]))) < _FEWEST_LEVELS:
        return None
    sizes = np.abs(finite[moved + 1] - finite[moved])[~_by_the_clock(moved)]
    if len(sizes) < _FEWEST:
        return None
    low = float(np.quantile(sizes, _STRAY_CHANGES))
    smaller, next_up = int(np.sum(sizes < 0.5 * low)), int(np.sum((sizes >= low) & (sizes < 2 * low)))
    if next_up < _FEWEST or smaller > _HOLE * next_up:
        return None
    if low < (_LAST_DIGIT * float(np.std(finite)) if step is None else _ABOVE_STEP * step):
        return None
    least = float(sizes.min())
    return least if least > 0.9 * low else low


def _by_the_clock(moved: IntArray) -> BoolArray:
    """Return True for the changes stored after the longest time without one, where many are, and for the first."""
    since = np.diff(moved, prepend=moved[0])
    longest: BoolArray = since == since.max()
    if since.max() <= 2 or longest.mean() <= _REGULAR_STORES:
        longest = np.zeros(len(moved), dtype=np.bool_)
    longest[0] = True
    return longest


def find(seen: Evidence) -> list[Finding]:
    """Report the signals that went through such an archive."""
    findings = []
    for trace in seen.recorded_traces:
        if trace.deadband is None:
            continue
        stored = trace.sampled[np.isfinite(trace.sampled)]
        held = float(np.mean(np.diff(stored) == 0)) if len(stored) > 1 else 0.0
        findings.append(
            Finding(
                kind="exception-reported",
                start=None,
                end=None,
                count=int(np.sum(np.diff(stored) != 0)),
                detail=f"{percent(held)} of the samples repeat the one before, and hardly a change is smaller than "
                f"{number(trace.deadband)} {trace.unit}".rstrip(),
                effect=_effect(trace.role, trace.held, trace.deadband, trace.unit),
                signal=trace.name,
                weight="limits the answer",
            )
        )
    return findings


def _effect(role: str, held: bool, deadband: float, unit: str) -> str:
    """Say what follows for the answer."""
    if role == "actuator":
        return "kept as stored; what the controller does not explain is not carried into the replay"
    text = f"kept as stored, held between changes; thresholds below {4 * deadband:.3g} {unit}".rstrip()
    text += " (four dead-bands) are not answered"
    return text if held else text + '; where rows are missing, state stored = "on-change"'
