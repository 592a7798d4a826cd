"""Values stored on a lattice: the step, found from the distances of neighbouring values."""

from __future__ import annotations

import numpy as np

from auditor.arrays import FloatArray
from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence, Trace
from auditor.logs.runs import thinned
from auditor.text import number

_SMALLEST = 1e-4
_NOISE_OF_SPREAD = 1e-6
_NOISE_OF_LEVEL = 2e-7
_OFF_LATTICE = 0.05
_ON_LATTICE = 0.99
_HALVINGS = 24
_USUAL = 0.9
_COARSE = 0.2


def quantum(values: FloatArray, fewest: int = 4) -> float | None:
    """Return the step of the lattice the values lie on.

    The step is the greatest common divisor of the distances between neighbouring distinct values, found by Euclid's
    algorithm on all distances at once with a tolerance for the noise of single-precision storage.

    Parameters
    ----------
    values : ndarray
        NaN allowed.
    fewest : int
        Distinct values below which nothing is concluded.

    Returns
    -------
    float or None
        None when the values are on no lattice, or on one finer than 1e-4 of their deviation.
    """
    finite = values[np.isfinite(values)]
    if len(finite) < 2 * fewest:
        return None
    some = thinned(finite)
    spread = float(np.std(some))
    noise = _NOISE_OF_SPREAD * spread + _NOISE_OF_LEVEL * float(np.abs(some).max())
    levels = _levels(some, noise, fewest)
    if len(levels) < fewest or spread == 0.0:
        return None
    steps = np.diff(levels)
    divisor = _common_divisor(steps, noise, _SMALLEST * spread)
    if divisor is None:
        return None
    step = _rounded(*_fitted(levels, divisor))
    return step if step >= _SMALLEST * spread and _on_lattice(finite, step, float(levels[0])) else None


def _levels(values: FloatArray, noise: float, fewest: int) -> FloatArray:
    """Return the distinct values, noise apart; the usual ones alone where values repeat."""
    levels, counts = np.unique(values, return_counts=True)
    heads = np.flatnonzero(np.diff(levels, prepend=-np.inf) > noise)
    levels, counts = levels[heads], np.add.reduceat(counts, heads)
    repeated = counts > 1
    if counts[repeated].sum() >= _USUAL * len(values) and repeated.sum() >= fewest:
        return levels[repeated]
    return levels


def _common_divisor(steps: FloatArray, noise: float, smallest: float) -> float | None:
    """Return the largest number that divides all `steps` up to `noise`, None when it is under `smallest`."""
    divisor = float(steps.min())
    for _ in range(_HALVINGS):
        if divisor < max(smallest * (1 - _OFF_LATTICE), 10 * noise):
            return None
        times = np.rint(steps / divisor)
        rest = np.abs(steps - times * divisor)
        allowed = 2 * noise * np.maximum(1.0, times)
        left = rest[rest > np.minimum(allowed, _OFF_LATTICE * divisor)]
        if len(left) == 0:
            return divisor
        divisor = float(left.min())
    return None


def _fitted(levels: FloatArray, divisor: float) -> tuple[float, float]:
    """Return the step by least squares over all levels, and the number of steps between the outer ones."""
    index = np.concatenate(([0.0], np.cumsum(np.rint(np.diff(levels) / divisor))))
    centred = index - index.mean()
    return float(centred @ (levels - levels.mean()) / (centred @ centred)), float(index[-1])


def _rounded(step: float, reach: float) -> float:
    """Write the step with the fewest digits that move the far end of the lattice by less than 1/500 of a step."""
    for digits in range(1, 15):
        short = float(f"{step:.{digits}g}")
        if abs(short - step) * reach < 0.002 * step:
            return short
    return step


def _on_lattice(values: FloatArray, step: float, origin: float) -> bool:
    """Tell whether nearly all values lie on the lattice."""
    off = (values - origin) / step
    off -= np.rint(off)
    return bool(np.mean(np.abs(off) < _OFF_LATTICE) >= _ON_LATTICE)


_EFFECT = {
    "measurement": "the replayed measurement is rounded the same way; thresholds below three steps are not answered",
    "actuator": "none on the values; the controller is recovered from levels, where rounding does not add up; moves "
    "below a step are not in the log, so that the record returns to {half:.3g} {unit} (half a step) at best",
    "setpoint": "none on the values; a setpoint change is one of at least a step",
    "disturbance": "none",
}


def find(seen: Evidence) -> list[Finding]:
    """Report every signal stored with a visible step."""
    return [
        Finding(
            kind="quantised",
            start=None,
            end=None,
            count=len(np.unique(trace.values[np.isfinite(trace.values)])),
            detail=_detail(trace, trace.quantum),
            effect=_EFFECT[trace.role].format(half=trace.quantum / 2, unit=trace.unit).replace("  ", " "),
            weight=_weight(trace, trace.quantum),
            signal=trace.name,
        )
        for trace in seen.recorded_traces
        if trace.quantum is not None
    ]


def _weight(trace: Trace, step: float) -> str:
    """Tell whether an actuator is so coarse that the rounding is a good part of its moves."""
    coarse = trace.role == "actuator" and step > _COARSE * float(np.nanstd(trace.values))
    return "limits the answer" if coarse else "note"


def _detail(trace: Trace, step: float) -> str:
    """Say how coarse the step is and who says so; a stated step the values contradict is named."""
    deviation = float(np.nanstd(trace.values)) if np.isfinite(trace.values).any() else 0.0
    parts = f", {number(step / deviation, 2)} of the signal's standard deviation" if deviation > 0 else ""
    text = f"stored in steps of {step:g} {trace.unit}".rstrip() + parts
    if trace.resolution is None:
        return text
    found = quantum(trace.values)
    if found is not None and abs(found - step) < 0.01 * step:
        return text + " (stated in the loop file)"
    seen = "no visible step" if found is None else f"steps of {found:g}"
    return text + f" (stated in the loop file; the values themselves show {seen})"
