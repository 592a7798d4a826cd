"""One generation of the sampler: differential-evolution Markov chains over plants of several structures.

Each of the chains proposes to move along the difference of two others (ter Braak, Statistics and Computing 16
(2006) 239) and sometimes to another structure or load entry. All randomness comes in as arrays, so that the same
draws give the same bits, compiled or not.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.kernels import points
from auditor.kernels.jit import compiled
from auditor.kernels.prior import Tuning, log_prior
from auditor.kernels.spectral import IMPOSSIBLE, WORK_ROWS, Bins, log_likelihood

STRUCTURE = 0
ENTRY = 1


class Target(NamedTuple):
    """The density to sample: record, prior, and what is allowed.

    Attributes
    ----------
    bins : Bins
    tuning : Tuning
    low, high : ndarray, shape (8,)
        Bounds of the coordinates; equal where a coordinate is given.
    allowed : ndarray of bool, shape (structures, entries)
        Kinds of plant and load entry that exist.
    """

    bins: Bins
    tuning: Tuning
    low: FloatArray
    high: FloatArray
    allowed: BoolArray


class Chains(NamedTuple):
    """State of n chains, changed in place by `generation`.

    Attributes
    ----------
    x : ndarray, shape (n, 8)
    kind : ndarray of int, shape (n, 2)
        Structure and load entry.
    log_posterior, log_likelihood : ndarray, shape (n,)
        The posterior is tempered, log likelihood / temperature + log prior.
    """

    x: FloatArray
    kind: IntArray
    log_posterior: FloatArray
    log_likelihood: FloatArray


class Moves(NamedTuple):
    """The random numbers of one generation of n chains.

    Attributes
    ----------
    pair : ndarray of int, shape (n, 2)
        The two chains whose difference is the direction.
    stride : ndarray, shape (n, 8)
        Multiple of the difference, per coordinate.
    jitter : ndarray, shape (n, 8)
        What is added besides.
    kind : ndarray of int, shape (n, 2)
        Change of structure, and shift of the load entry (counted round the entries).
    log_uniform : ndarray, shape (n,)
        Logarithms of uniform numbers for acceptance.
    """

    pair: IntArray
    stride: FloatArray
    jitter: FloatArray
    kind: IntArray
    log_uniform: FloatArray


@compiled
def possible(x: FloatArray, m: int, entry: int, target: Target) -> bool:
    """True inside the bounds and where structure and entry exist together."""
    if m < 0 or m >= target.allowed.shape[0] or not target.allowed[m, entry]:
        return False
    inside = True
    for i in range(points.COORDINATES):
        inside = inside and target.low[i] <= x[i] <= target.high[i]
    return inside


@compiled
def log_posterior(
    x: FloatArray, m: int, entry: int, temperature: float, target: Target, work: FloatArray
) -> tuple[float, float]:
    """Tempered log posterior and log likelihood."""
    if not possible(x, m, entry, target):
        return IMPOSSIBLE, IMPOSSIBLE
    value, peak = log_likelihood(x, m, entry, target.bins, work)
    if value == IMPOSSIBLE:
        return IMPOSSIBLE, IMPOSSIBLE
    return value / temperature + log_prior(x, m, entry, peak, target.tuning), value


@compiled
def evaluate(chains: Chains, temperature: float, target: Target) -> None:
    """Fill in the log densities of all chains."""
    work = np.empty((WORK_ROWS, target.bins.measured.shape[1]))
    for i in range(len(chains.x)):
        m, entry = chains.kind[i, STRUCTURE], chains.kind[i, ENTRY]
        chains.log_posterior[i], chains.log_likelihood[i] = log_posterior(
            chains.x[i], m, entry, temperature, target, work
        )


@compiled
def propose(i: int, chains: Chains, moves: Moves, y: FloatArray) -> None:
    """Write the proposal of chain i into `y`; a negative delay is reflected."""
    a = chains.x[moves.pair[i, 0]]
    b = chains.x[moves.pair[i, 1]]
    for j in range(points.COORDINATES):
        y[j] = chains.x[i, j] + moves.stride[i, j] * (a[j] - b[j]) + moves.jitter[i, j]
    y[points.DELAY] = abs(y[points.DELAY])


@compiled
def generation(chains: Chains, moves: Moves, temperature: float, target: Target) -> None:
    """Let every chain propose once, in turn, and accept or stay (Metropolis)."""
    work = np.empty((WORK_ROWS, target.bins.measured.shape[1]))
    y = np.empty(points.COORDINATES)
    entries = target.allowed.shape[1]
    for i in range(len(chains.x)):
        propose(i, chains, moves, y)
        m = chains.kind[i, STRUCTURE] + moves.kind[i, STRUCTURE]
        entry = (chains.kind[i, ENTRY] + moves.kind[i, ENTRY]) % entries
        posterior, likelihood = log_posterior(y, m, entry, temperature, target, work)
        if moves.log_uniform[i] < posterior - chains.log_posterior[i]:
            chains.x[i] = y
            chains.kind[i, STRUCTURE] = m
            chains.kind[i, ENTRY] = entry
            chains.log_posterior[i] = posterior
            chains.log_likelihood[i] = likelihood
