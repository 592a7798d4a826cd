"""Numbers that stand for "no value": far from everything else and always exactly the same."""

from __future__ import annotations

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.series import usual_run
from auditor.logs.findings.wording import moment, plural
from auditor.logs.runs import thinned
from auditor.text import percent

CUSTOMARY: frozenset[float] = frozenset(
    sign * size
    for size in (999.0, 999.9, 999.25, 999.99, 9999.0, 9999.9, 9999.99, 99999.0, 999999.0, 1e20, 1e30)
    for sign in (-1.0, 1.0)
) | {-273.0, -273.1, -273.15, -273.2, -300.0, -32768.0, 32767.0, 65535.0, -2147483648.0, 2147483647.0, 9.96921e36}
"""Customary fill values; far outside the signal one occurrence is enough, any other number must repeat."""

_FAR = 20.0
_REPEATS = 3
_SINGLE = 1e-7
_PARTS_OF_LEVEL = 1e-3
_QUARTILES_PER_DEVIATION = 1.349


def sentinel_mask(values: FloatArray, any_number: bool) -> BoolArray:
    """Return True where a raw value stands for "no value".

    A number is taken for one when it is further than 20 robust deviations from the median and from every other
    number of the signal, and either customary or, where `any_number` is allowed, the same at least three times (as
    often as three usual runs of one value, where a rounded or held signal repeats its values anyway).

    Parameters
    ----------
    values : ndarray, shape (rows,)
        As recorded, NaN allowed.
    any_number : bool
        False for signals that may rest far away for good reasons (all but the measurement) and where the loop file
        states a range, which says better what is no value.
    """
    mask = np.zeros(len(values), dtype=np.bool_)
    centre, quartiles = _scale(values)
    deviation = max(quartiles, _PARTS_OF_LEVEL * abs(centre))
    low, high = centre - _FAR * deviation, centre + _FAR * deviation
    if not len(values) or (np.fmin.reduce(values) >= low and np.fmax.reduce(values) <= high):
        return mask
    far = np.flatnonzero((values < low) | (values > high))
    levels, counts = np.unique(values[far], return_counts=True)
    apart = _apart(levels, centre, _FAR * deviation)
    repeated = np.zeros(len(levels), dtype=np.bool_)
    if any_number and quartiles > 0:
        repeated = counts >= _REPEATS * usual_run(values)
    chosen = levels[apart & (_customary(levels) | repeated)]
    mask[far] = np.isin(values[far], chosen)
    return mask


def _customary(levels: FloatArray) -> BoolArray:
    """Return True for the customary numbers, also where they went through single precision (−273.20001)."""
    known = np.array(sorted(CUSTOMARY))
    nearest = known[np.argmin(np.abs(levels[:, None] - known), axis=1)]
    return np.asarray(np.abs(levels - nearest) <= _SINGLE * np.abs(nearest))


def _scale(values: FloatArray) -> tuple[float, float]:
    """Return the median and the deviation that the quartiles stand for."""
    some = thinned(values)
    some = some[np.isfinite(some)]
    if len(some) == 0:
        return 0.0, 0.0
    low, centre, high = np.quantile(some, [0.25, 0.5, 0.75])
    return float(centre), float(high - low) / _QUARTILES_PER_DEVIATION


def _apart(levels: FloatArray, centre: float, distance: float) -> BoolArray:
    """Return True for the far levels that no other level comes near; the near ones end at `distance` from `centre`."""
    with np.errstate(invalid="ignore"):
        below = np.diff(levels, prepend=-np.inf)
        above = np.diff(levels, append=np.inf)
    return np.asarray((below > distance) & (above > distance) & np.isfinite(levels) & (levels != centre))


def find(seen: Evidence) -> list[Finding]:
    """Report the numbers that were not used because they stand for "no value"."""
    findings = []
    for trace in seen.recorded_traces:
        taken = trace.removed.get("sentinel", np.empty(0))
        if len(taken) == 0:
            continue
        at = seen.stamps[trace.spoiled["sentinel"]]
        levels, counts = np.unique(taken, return_counts=True)
        told = ", ".join(f"{level:g} ({plural(int(n), 'row')})" for level, n in zip(levels, counts, strict=True))
        where = (int(at[0]), int(at[-1])) if len(at) else (None, None)
        since = f", first at {moment(where[0])}" if where[0] is not None else ""
        share = len(taken) / max(1, len(trace.values))
        findings.append(
            Finding(
                kind="sentinel",
                start=where[0],
                end=where[1],
                count=len(taken),
                detail=f"{told}: the same number far from all others, {percent(share, 2)} of the rows{since}",
                effect="taken as no value; short stretches are held, longer ones cut the record",
                signal=trace.name,
                weight="limits the answer" if share > 0.01 else "note",
            )
        )
    return findings
