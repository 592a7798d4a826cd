"""Where the chains begin: random plants around what the controller's tuning suggests, the likely ones chosen.

Every kind of plant and load entry gets its share of chains whatever the likelihood of its starts, so that a mode that
is hard to hit is not lost before the chains have moved.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.errors import CannotAnswerError, Problem
from auditor.identify.family import Family
from auditor.identify.posterior import chains_at, join, pick
from auditor.kernels import points
from auditor.kernels.chains import Chains, Target
from auditor.kernels.spectral import IMPOSSIBLE

STARTS = 6000
CHAINS = 80
_CHOICE = 4  # a start is chosen among this many times as many good ones


class Cell(NamedTuple):
    """A group of starts: oscillating or not, where the load enters, and its share of starts and chains."""

    oscillates: bool
    entry: int
    share: float


CELLS = (
    Cell(False, points.AT_INPUT, 0.30),
    Cell(False, points.AT_OUTPUT, 0.12),
    Cell(False, points.AFTER_SHORT_LAGS, 0.11),
    Cell(False, points.AFTER_LONG_LAG, 0.11),
    Cell(False, points.BETWEEN_SHORT_LAGS, 0.11),
    Cell(False, points.AT_BOTH_ENDS, 0.11),
    Cell(True, points.AT_INPUT, 0.09),
    Cell(True, points.AT_OUTPUT, 0.05),
)


def random_points(
    n: int, cell: Cell, kinds: Family, integral_time: float, rng: np.random.Generator
) -> tuple[FloatArray, IntArray]:
    """Return n starts of one cell: coordinates, shape (n, 8), and kinds, shape (n, 2).

    Parameters
    ----------
    n : int
    cell : Cell
    kinds : Family
    integral_time : float
        Ti [base periods], may be infinite.
    rng : Generator
    """
    x = np.empty((n, points.COORDINATES))
    structures = np.flatnonzero(kinds.allowed[: points.OSCILLATOR, cell.entry])
    structure = np.full(n, points.OSCILLATOR) if cell.oscillates else rng.choice(structures, n)
    x[:, points.DELAY] = np.where(rng.random(n) < 0.5, rng.uniform(0.0, 8.0, n), rng.uniform(0.0, 35.0, n))
    x[:, points.LN_LAGS] = rng.uniform(np.log(2.0), np.log(60.0), n)
    x[:, points.LN_CORNER] = rng.uniform(np.log(3e-4), np.log(0.1), n)
    x[:, points.LN_WALK] = rng.uniform(-12.0, -2.0, n)
    x[:, points.LN_NOISE] = rng.uniform(-4.0, 12.0, n)
    x[:, points.ZERO] = rng.uniform(-6.0, 6.0, n)
    x[:, points.LN_POLE] = rng.uniform(np.log(0.03), 0.0, n) if cell.oscillates else _ln_poles(n, integral_time, rng)
    x[:, points.LN_GAIN] = _ln_gains(x, structure, cell.oscillates, integral_time, rng)
    kind = np.stack([structure, np.full(n, cell.entry)], axis=1).astype(np.int64)
    return np.clip(x, kinds.low, kinds.high), kind


def _ln_poles(n: int, integral_time: float, rng: np.random.Generator) -> FloatArray:
    """The long lag near the integral time; anywhere when there is no integral action."""
    if np.isfinite(integral_time):
        return np.asarray(-(np.log(integral_time) + rng.normal(0.3, 0.8, n)))
    return rng.uniform(-np.log(1000.0), -np.log(5.0), n)


def _ln_gains(
    x: FloatArray, structure: IntArray, oscillates: bool, integral_time: float, rng: np.random.Generator
) -> FloatArray:
    """A gain that gives the loop a usual margin: against delay and lags, or against the oscillation's peak."""
    lags = np.where((structure > 0) & (not oscillates), np.exp(x[:, points.LN_LAGS]), 0.0)
    usual = -np.log(rng.uniform(0.8, 3.0, len(x)) * (x[:, points.DELAY] + 0.7 * lags + 2.0))
    if not oscillates or not np.isfinite(integral_time):
        return np.asarray(usual)
    share = rng.uniform(0.1, 0.9, len(x))
    # Integral action alone reaches −180° at w0, with gain kv / (2 zeta w0² Ti) there.
    of_peak = np.log(2.0 * share * integral_time) + x[:, points.LN_POLE] - 2.0 * x[:, points.LN_LAGS]
    return np.where(rng.random(len(x)) < 0.5, of_peak, usual)


def first_chains(
    density: Target, kinds: Family, integral_time: float, temperature: float, rng: np.random.Generator
) -> Chains:
    """Return the chains at their chosen starts.

    Raises
    ------
    CannotAnswerError
        When under every start the recorded loop would be unstable.
    """
    chosen = []
    cells = [cell for cell in CELLS if kinds.allowed[points.OSCILLATOR if cell.oscillates else 2, cell.entry]]
    total = sum(cell.share for cell in cells)
    for cell in cells:
        n = round(STARTS * cell.share / total)
        tried = chains_at(*random_points(n, cell, kinds, integral_time, rng), temperature, density)
        chosen.append(pick(tried, _choose(tried.log_posterior, round(CHAINS * cell.share / total), rng)))
    pool = join(chosen)
    if not len(pool.x):
        raise CannotAnswerError(_no_start())
    filling = rng.integers(len(pool.x), size=max(CHAINS - len(pool.x), 0))
    return pick(pool, np.concatenate([np.arange(min(len(pool.x), CHAINS)), filling]))


def _choose(log_posterior: FloatArray, wanted: int, rng: np.random.Generator) -> IntArray:
    order = np.argsort(-log_posterior, kind="stable")
    good = order[log_posterior[order] > IMPOSSIBLE][: _CHOICE * wanted]
    return rng.choice(good, min(len(good), wanted), replace=False) if len(good) else good


def _no_start() -> Problem:
    return Problem(
        what="No plausible plant makes the recorded loop stable with the controller as stated.",
        found="all random starts are unstable",
        do="Check the controller's gain, its sign, and its integral time, and that u is the actuator of this loop.",
    )
