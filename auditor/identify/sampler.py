"""Draws from the posterior: chains that are resampled while they cool, then run at their final temperature.

Cooling alone leaves chains in poor modes; the weights that a change of temperature implies are therefore kept, and
the chains resampled by them whenever few chains carry most of the weight (annealed importance sampling, Neal,
Statistics and Computing 11 (2001) 125; with resampling, Del Moral, Doucet & Jasra, JRSS B 68 (2006) 411).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.identify.family import Family
from auditor.identify.posterior import TEMPERATURE, chains_at, join, pick, target, unspoilt
from auditor.identify.spectrum import Spectrum
from auditor.identify.starts import first_chains
from auditor.kernels import points
from auditor.kernels.chains import Chains, Moves, Target, generation
from auditor.kernels.prior import Tuning
from auditor.kernels.spectral import IMPOSSIBLE

COOLING = 220  # generations
SETTLED = 280
_HOTTEST = 30.0  # times the final temperature
_RESTART = 60  # generation of the settled part at which chains left behind are replaced
_SNAPSHOTS = (94, 187, 280)
_GAP = 12.0  # log posterior below the best at which a chain counts as left behind
_REPORTED = 20  # generations between two reports of progress

_FULL_STRIDE, _ALONG_FEW, _CHANGE_KIND, _CHANGE_STRUCTURE = 0.10, 0.15, 0.20, 0.70
_LONGEST_STRIDE, _FEW_STRIDE, _JITTER = 0.825, 1.2, 1e-3


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Members:
    """Posterior members of one run, with the ordinates the run was judged on.

    Attributes
    ----------
    x : ndarray, shape (n, 8)
    kind : ndarray of int, shape (n, 2)
    keep : ndarray of bool, shape (M,)
    """

    x: FloatArray
    kind: IntArray
    keep: BoolArray


def run(
    spectrum: Spectrum,
    kinds: Family,
    weights: Tuning,
    seed: int | np.random.SeedSequence,
    observe: Callable[[float], None] = lambda share: None,
) -> Members:
    """Return the members of one run.

    Parameters
    ----------
    spectrum : Spectrum
    kinds : Family
    weights : Tuning
    seed : int or SeedSequence
        The same seed gives the same members.
    observe : callable
        Called with the share of the run that is done.

    Raises
    ------
    CannotAnswerError
        When under every start the recorded loop would be unstable.
    """
    rng = np.random.default_rng(seed)
    integral_time = spectrum.controller.integral_time / spectrum.period
    density = target(spectrum, kinds, weights)
    chains = first_chains(density, kinds, integral_time, TEMPERATURE * _HOTTEST, rng)
    chains = cool(chains, density, rng, observe)
    best = int(np.argmax(chains.log_likelihood))
    keep = unspoilt(spectrum, chains.x[best], chains.kind[best])
    density = target(spectrum, kinds, weights, keep)
    x, kind = settle(chains_at(chains.x, chains.kind, TEMPERATURE, density), density, rng, observe)
    return Members(x=x, kind=kind, keep=keep)


def cool(
    chains: Chains, density: Target, rng: np.random.Generator, observe: Callable[[float], None] = lambda share: None
) -> Chains:
    """Cool the chains to the final temperature, resampling as they go; return them."""
    temperatures = TEMPERATURE * _HOTTEST ** np.linspace(1.0, 0.0, COOLING)
    log_weight = np.zeros(len(chains.x))
    for g, temperature in enumerate(temperatures):
        if g > 0:
            _reweigh(chains, log_weight, 1.0 / temperature - 1.0 / temperatures[g - 1])
            if _effective_size(log_weight) < 0.5 * len(log_weight) or g == COOLING - 1:
                chains = pick(chains, _systematic(np.exp(log_weight - log_weight.max()), rng))
                log_weight[:] = 0.0
        generation(chains, draw_moves(len(chains.x), density, rng), temperature, density)
        _report(g, 0, observe)
    return chains


def settle(
    chains: Chains, density: Target, rng: np.random.Generator, observe: Callable[[float], None] = lambda share: None
) -> tuple[FloatArray, IntArray]:
    """Run the chains at the final temperature; return coordinates and kinds of the snapshots near the best."""
    kept = []
    for g in range(SETTLED):
        if g == _RESTART:
            chains = _replace_left_behind(chains, rng)
        generation(chains, draw_moves(len(chains.x), density, rng), TEMPERATURE, density)
        if g + 1 in _SNAPSHOTS:
            kept.append(pick(chains, np.arange(len(chains.x))))
        _report(g, COOLING, observe)
    members = join(kept)
    near = members.log_posterior > members.log_posterior.max() - _GAP
    return members.x[near], members.kind[near]


def draw_moves(n: int, density: Target, rng: np.random.Generator) -> Moves:
    """Return the random numbers of one generation of n chains.

    Most moves go along the whole difference of two chains, some (1 in 7) along one or two coordinates of it; one in
    five also changes the structure to a neighbour or the load entry to another.
    """
    along = rng.random(n)
    full = np.where(along < _FULL_STRIDE, 1.0, _LONGEST_STRIDE * rng.random(n))
    stride = np.repeat(full[:, None], points.COORDINATES, axis=1)
    few = along > 1.0 - _ALONG_FEW
    chosen = np.zeros((n, points.COORDINATES), dtype=np.bool_)
    np.put_along_axis(chosen, rng.integers(points.COORDINATES, size=(n, 2)), True, axis=1)
    stride[few] = np.where(chosen[few], _FEW_STRIDE, 0.0)
    moving = (density.low < density.high) & (chosen | ~few[:, None])
    return Moves(
        pair=rng.integers(n, size=(n, 2)),
        stride=stride,
        jitter=np.where(moving, _JITTER * rng.standard_normal((n, points.COORDINATES)), 0.0),
        kind=_kind_changes(n, rng),
        log_uniform=np.log1p(-rng.random(n)),
    )


def _kind_changes(n: int, rng: np.random.Generator) -> IntArray:
    change = np.zeros((n, 2), dtype=np.int64)
    changes, of_structure = rng.random(n) < _CHANGE_KIND, rng.random(n) < _CHANGE_STRUCTURE
    step, shift = 2 * rng.integers(2, size=n) - 1, rng.integers(1, points.ENTRIES, size=n)
    change[:, 0] = np.where(changes & of_structure, step, 0)
    change[:, 1] = np.where(changes & ~of_structure, shift, 0)
    return change


def _reweigh(chains: Chains, log_weight: FloatArray, change: float) -> None:
    """Carry densities and weights over to another temperature, in place; `change` is that of 1/T."""
    dead = chains.log_posterior <= IMPOSSIBLE
    step = np.where(dead, 0.0, chains.log_likelihood * change)
    chains.log_posterior[:] += step
    log_weight[:] += step
    log_weight[dead] = -np.inf


def _effective_size(log_weight: FloatArray) -> float:
    weight = np.exp(log_weight - log_weight.max())
    return float(weight.sum() ** 2 / np.sum(weight**2))


def _systematic(weight: FloatArray, rng: np.random.Generator) -> IntArray:
    """Indices of systematic resampling: as many as there are weights, each as often as its weight says."""
    n = len(weight)
    marks = (np.arange(n) + rng.random()) / n
    return np.minimum(np.searchsorted(np.cumsum(weight) / weight.sum(), marks), n - 1).astype(np.int64)


def _replace_left_behind(chains: Chains, rng: np.random.Generator) -> Chains:
    """Put a random good chain in the place of every chain far below the best."""
    good = np.flatnonzero(chains.log_posterior >= chains.log_posterior.max() - _GAP)
    index = np.arange(len(chains.x))
    behind = chains.log_posterior < chains.log_posterior.max() - _GAP
    index[behind] = rng.choice(good, int(behind.sum()))
    return pick(chains, index)


def _report(g: int, before: int, observe: Callable[[float], None]) -> None:
    if (g + 1) % _REPORTED == 0:
        observe((before + g + 1) / (COOLING + SETTLED))
