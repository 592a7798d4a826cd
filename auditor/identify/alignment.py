"""Which sample of the actuator belongs to which error, and what kind of controller lies between them.

For every lag and every candidate kind the controller's equation is fitted; the smallest residual tells the lag, and a
richer kind is taken only when its residual is clearly smaller (method, §5.1).
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import product
from typing import TypeVar

import numpy as np
import numpy.typing as npt
from scipy.optimize import minimize_scalar

from auditor.arrays import IntArray, read_only
from auditor.identify import thresholds
from auditor.identify.regression import (
    Design,
    Fit,
    Terms,
    difference_design,
    difference_rows,
    level_design,
    level_rows,
    solve,
)
from auditor.identify.signals import Signals, window
from auditor.logs.findings.base import Finding
from auditor.logs.record import CAUSES, Record, Span

_Number = TypeVar("_Number", bound=np.generic)

LAGS = tuple(sorted(range(-thresholds.LONGEST_SKEW, thresholds.LONGEST_SKEW + 1), key=lambda lag: (abs(lag), lag)))

_POLES = (0.0, 0.1, 0.2, 0.33, 0.5, 0.67, 0.8, 0.9, 0.95)
"""Derivative poles tried before the search between them: Tf/h from 0 to 19."""

_SEARCH_PASSES = 8
"""Reweightings while the pole is searched; the fit at the pole found has all of them."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Match:
    """The kind of controller and the lag that leave least of the actuator; `table` is (lag, relative residual)."""

    terms: Terms
    lag: int
    fit: Fit
    levels: bool
    table: tuple[tuple[int, float], ...]


def shift_actuator(record: Record, skew: int) -> Record:
    """Return the record with u moved by `skew` samples, so that u_k is what acts from t_k on.

    Parameters
    ----------
    skew : int
        Samples by which the actuator's column is late (+) or early (−); spans lose that many samples at one end.
    """
    if skew == 0:
        return record
    u = _moved(record.u, skew, np.nan)
    valid = record.valid & _moved(record.valid, skew, False)
    cause = record.cause
    if cause is not None:
        cause = read_only(np.where(cause != 0, cause, _moved(cause, skew, CAUSES.index("gap"))))
    ends = ((span.start + max(0, -skew), span.stop - max(0, skew)) for span in record.spans)
    spans = tuple(Span(start, stop) for start, stop in ends if stop - start > 1)
    shifted = replace(record, u=read_only(u), valid=read_only(valid), spans=spans, cause=cause)
    return shifted.with_findings(
        Finding(
            kind="skew",
            start=None,
            end=None,
            count=abs(skew),
            detail=skew_words(skew),
            effect="actuator shifted back",
            signal="actuator",
        )
    )


def _moved(values: npt.NDArray[_Number], skew: int, outside: float) -> npt.NDArray[_Number]:
    """values[k + skew] at k."""
    moved = np.full_like(values, outside)
    far = min(abs(skew), len(values))
    if skew >= 0:
        moved[: len(values) - far] = values[far:]
    else:
        moved[far:] = values[: len(values) - far]
    return moved


def skew_words(skew: int) -> str:
    """Say by how much the actuator's column is late (+) or early (−)."""
    samples = "1 sample" if abs(skew) == 1 else f"{abs(skew)} samples"
    return f"the actuator's column is {samples} {'late' if skew > 0 else 'early'} against the measurement"


def setpoint_moves(signals: Signals) -> bool:
    """Tell whether the setpoint ever moves inside a span."""
    inside = signals.good[1:] & signals.good[:-1] & (signals.age[1:] > 0)
    return bool(np.any(np.diff(signals.r)[inside] != 0))


def lay_out(signals: Signals, lag: int, terms: Terms, *, levels: bool, most: int | None = None) -> Design:
    """Lay out the regression for one lag; `most` thins the rows, all of them when None."""
    rows = level_rows(signals, lag, terms) if levels else difference_rows(signals, lag, terms)
    if most is not None and len(rows) > most:
        rows = _thinned(signals, rows, most)
    return level_design(signals, lag, terms, rows) if levels else difference_design(signals, lag, terms, rows)


def best_match(signals: Signals, *, saturates: bool, quantum: float = 0.0) -> Match | None:
    """Return the simplest controller that explains the actuator, or None when too few rows are away from limits.

    Differences first; levels instead where u is rounded to `quantum` or what remains is white noise on the actuator
    itself, because differencing doubles such noise while the error's own differences are small. Least absolute
    residuals where the actuator saturates or rare large moves decide the fit: conditional integration, for one, stops
    the integral on samples where the actuator is not at its limit.
    """
    if np.count_nonzero(signals.moving) < thresholds.ROWS_NEEDED:
        return None
    part = window(signals, thresholds.SCAN_SAMPLES)
    match = _search(signals, part, robust=False, levels=False)
    if match is None or match.fit.exact:
        return match
    robust = saturates or _heavy_tailed(signals, match)
    if robust:
        match = _search(signals, part, robust=True, levels=False) or match
    if match.fit.exact or not (quantum > 0 or _noise_on_level(match.fit)):
        return match
    levelled = _search(signals, part, robust=robust, levels=True)
    return levelled if levelled is not None and _levels_hold(levelled, match, quantum) else match


def _search(signals: Signals, part: Signals, *, robust: bool, levels: bool) -> Match | None:
    """Find lag and kind on a part of the record, the coefficients on all of it."""
    best: Match | None = None
    for terms in _kinds(setpoint_moves(part), len(part.w)):
        if best is not None and best.fit.exact:
            break
        candidate = _best_lag(part, terms, robust=robust, levels=levels)
        if candidate is not None and (best is None or _clearly_better(candidate, best)):
            best = candidate
    if best is None:
        return None
    return replace(best, fit=solve(lay_out(signals, best.lag, best.terms, levels=levels), robust))


def _kinds(moves: bool, disturbances: int) -> Iterator[Terms]:
    """Candidates, simplest first; setpoint weight and derivative on the error only show where the setpoint moves."""
    weights = (False, True) if moves else (False,)
    feedforwards = (0, disturbances) if disturbances else (0,)
    for feedforward, weight, integral in product(feedforwards, weights, (False, True)):
        yield Terms(integral=integral, weight=weight, feedforward=feedforward)
    derivatives = ("measurement", "error") if moves else ("measurement",)
    for feedforward, weight, derivative in product(feedforwards, weights, derivatives):
        yield Terms(integral=True, derivative=derivative, weight=weight, feedforward=feedforward)


def _best_lag(signals: Signals, terms: Terms, *, robust: bool, levels: bool) -> Match | None:
    tried: list[tuple[Fit, int, Terms]] = []
    for lag in LAGS:
        at_lag = _best_pole(signals, terms, lag, levels=levels) if terms.derivative else terms
        design = lay_out(signals, lag, at_lag, levels=levels, most=thresholds.SCAN_ROWS)
        if len(design.target) >= thresholds.ROWS_NEEDED:
            tried.append((solve(design, robust), lag, at_lag))
    longest = int(np.max(signals.length, initial=0))
    plausible = [item for item in tried if _plausible(item[0], item[2], longest)]
    if not plausible:
        return None
    # In the order of LAGS the nearest lag comes first; a farther one must be clearly better.
    fit, lag, found = plausible[0]
    for item in plausible[1:]:
        if item[0].relative < thresholds.LAG_BETTER * fit.relative:
            fit, lag, found = item
    if terms.derivative:
        found = _refined_pole(signals, found, lag, robust=robust, levels=levels)
        fit = solve(lay_out(signals, lag, found, levels=levels, most=thresholds.SCAN_ROWS), robust)
    table = tuple(sorted((at, other.relative) for other, at, _ in tried))
    return Match(terms=found, lag=lag, fit=fit, levels=levels, table=table)


def _plausible(fit: Fit, terms: Terms, longest: int) -> bool:
    """Refuse what is no controller: parts that work against each other, an integral slower than the log."""
    gain, *rest = fit.coefficients
    if terms.integral:
        # The forward form's gain K + Ki is the largest of the three: a pure integral controller has only that one.
        forward = gain + rest[0]
        if forward * rest[0] <= 0 or abs(forward) > longest * abs(rest[0]):
            return False
    return terms.derivative is None or gain * rest[1 if terms.integral else 0] > 0


def _clearly_better(rich: Match, simple: Match) -> bool:
    """State of the rule: 2 n ln(scale ratio) above `BETTER` ln n per added coefficient; a derivative needs more."""
    if rich.fit.relative >= simple.fit.relative:
        return False
    if rich.fit.exact:
        return True
    added = max(1, rich.terms.count - simple.terms.count)
    n = min(rich.fit.rows, simple.fit.rows)
    gained = 2 * n * math.log(simple.fit.relative / rich.fit.relative)
    enough = gained > thresholds.BETTER * math.log(n) * added
    new_derivative = rich.terms.derivative is not None and simple.terms.derivative is None
    return enough and (not new_derivative or rich.fit.relative < thresholds.DERIVATIVE_BETTER * simple.fit.relative)


def _best_pole(signals: Signals, terms: Terms, lag: int, *, levels: bool) -> Terms:
    """Return the grid's best derivative pole by least squares."""

    def left(pole: float) -> float:
        design = lay_out(signals, lag, replace(terms, pole=pole), levels=levels, most=thresholds.SCAN_ROWS)
        return solve(design, robust=False).relative

    return replace(terms, pole=min(_POLES, key=left))


def _refined_pole(signals: Signals, terms: Terms, lag: int, *, robust: bool, levels: bool) -> Terms:
    """Search between the grid's neighbours; the residual of an exact log is a sharp V, which golden section follows."""
    at = _POLES.index(terms.pole)
    low, high = _POLES[max(0, at - 1)], (*_POLES, 0.99)[at + 1]

    def left(pole: float) -> float:
        design = lay_out(signals, lag, replace(terms, pole=pole), levels=levels, most=thresholds.SEARCH_ROWS)
        return solve(design, robust, _SEARCH_PASSES).relative

    found = minimize_scalar(left, bounds=(low, high), method="bounded", options={"xatol": 1e-13, "maxiter": 80})
    best = float(found.x) if found.fun < left(terms.pole) else terms.pole
    return replace(terms, pole=best)


def _noise_on_level(fit: Fit) -> bool:
    """Neighbouring differences of white noise correlate with −0.5."""
    rest = fit.residual
    power = float(np.dot(rest, rest))
    return power > 0 and float(np.dot(rest[1:], rest[:-1])) < -0.25 * power


def _heavy_tailed(signals: Signals, match: Match) -> bool:
    """Tell whether rare large moves decide the fit; says no where held samples leave most differences exactly zero."""
    size = np.abs(match.fit.residual)
    if float(np.mean(lay_out(signals, match.lag, match.terms, levels=False).target == 0)) > 0.5:
        return False
    return float(np.median(size)) < thresholds.HEAVY_TAIL * float(np.sqrt(np.mean(size**2)))


def _levels_hold(levels: Match, differences: Match, quantum: float) -> bool:
    """White noise is √2 smaller on levels than on differences; a law that drifts is not, and differences stand."""
    on_levels, on_differences = (float(np.sqrt(np.mean(m.fit.residual**2))) for m in (levels, differences))
    return on_levels <= max(quantum, 1.5 * on_differences / math.sqrt(2.0))


def _thinned(signals: Signals, rows: IntArray, most: int) -> IntArray:
    """Every n-th row, and all around setpoint moves."""
    every = -(-len(rows) // most)
    moved = np.flatnonzero(np.diff(signals.r, prepend=signals.r[0]) != 0)
    near = np.isin(rows, np.concatenate([moved - 1, moved, moved + 1])) if len(moved) < len(rows) // 10 else False
    chosen = (np.arange(len(rows)) % every == 0) | near
    return np.asarray(rows[chosen])
