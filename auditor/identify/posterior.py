"""The density the sampler draws from: record, prior, family; and the mask of ordinates that spoil it."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.ndimage import median_filter

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.identify.family import LONGEST_DELAY, Family
from auditor.identify.spectrum import Spectrum, binned, tabulate
from auditor.kernels import points
from auditor.kernels import spectral as kernel
from auditor.kernels.chains import Chains, Target, evaluate
from auditor.kernels.prior import Tuning

TEMPERATURE = 2.0
"""The log likelihood is divided by this: records are neither Gaussian nor linear enough to be believed in full."""

_CUT = 12.0  # times the local level: an ordinate of noise exceeds it once in 160 000
_MEDIAN_WIDTH = 41
_BLOCK = 8192  # ordinates looked at in one go


def target(spectrum: Spectrum, kinds: Family, weights: Tuning, keep: BoolArray | None = None) -> Target:
    """Return the density to sample.

    Parameters
    ----------
    spectrum : Spectrum
    kinds : Family
    weights : Tuning
        Prior.
    keep : ndarray of bool, shape (M,), optional
        Ordinates to use; all when left out.
    """
    chosen = np.ones(len(spectrum.w), dtype=np.bool_) if keep is None else keep
    bins = binned(spectrum, chosen, LONGEST_DELAY)
    return Target(bins=bins, tuning=weights, low=kinds.low, high=kinds.high, allowed=kinds.allowed)


def chains_at(x: FloatArray, kind: IntArray, temperature: float, density: Target) -> Chains:
    """Return chains at given points with their log densities.

    Parameters
    ----------
    x : ndarray, shape (n, 8)
    kind : ndarray of int, shape (n, 2)
    temperature : float
    density : Target
    """
    n = len(x)
    chains = Chains(
        x=np.array(x, order="C"),
        kind=np.array(kind, dtype=np.int64, order="C"),
        log_posterior=np.empty(n),
        log_likelihood=np.empty(n),
    )
    evaluate(chains, temperature, density)
    return chains


def pick(chains: Chains, index: IntArray) -> Chains:
    """Return copies of the chains at `index`."""
    return Chains(
        x=chains.x[index],
        kind=chains.kind[index],
        log_posterior=chains.log_posterior[index],
        log_likelihood=chains.log_likelihood[index],
    )


def join(parts: Sequence[Chains]) -> Chains:
    """Return all chains of several sets, one set after the other."""
    return Chains(
        x=np.concatenate([part.x for part in parts]),
        kind=np.concatenate([part.kind for part in parts]),
        log_posterior=np.concatenate([part.log_posterior for part in parts]),
        log_likelihood=np.concatenate([part.log_likelihood for part in parts]),
    )


def unspoilt(spectrum: Spectrum, x: FloatArray, kind: IntArray) -> BoolArray:
    """Return the ordinates, shape (M,), that are no outliers under the plant at `x`.

    Lines in the spectrum (a pump's pulsation, a daily cycle, an oscillating neighbour) are no noise of a smooth
    spectrum; an ordinate of |Y − G U|² / Phi far above the running median of its neighbours is dropped.
    """
    used = slice(int(spectrum.edges[0]), int(spectrum.edges[-1]))
    ratio = _misfit(spectrum, used, x, kind)
    span = spectrum.span[used]
    keep = np.ones(len(spectrum.w), dtype=np.bool_)
    for number in np.unique(span):
        mine = np.flatnonzero(span == number)
        # ln 2 is the median of an ordinate whose mean is 1.
        level = median_filter(ratio[mine], _MEDIAN_WIDTH, mode="nearest") / np.log(2.0)
        keep[used.start + mine] = ratio[mine] < _CUT * level
    return keep


def _misfit(spectrum: Spectrum, used: slice, x: FloatArray, kind: IntArray) -> FloatArray:
    """|Y − G U|² / Phi per ordinate."""
    longest = int(np.floor(x[points.DELAY]))
    parts = []
    for start in range(used.start, used.stop, _BLOCK):
        block = slice(start, min(start + _BLOCK, used.stop))
        w = spectrum.w[block]
        bins = tabulate(spectrum, w, np.zeros((5, len(w))), longest)
        work = np.empty((kernel.WORK_ROWS, len(w)))
        kernel.respond(np.ascontiguousarray(x), int(kind[0]), int(kind[1]), bins, work)
        G, phi = kernel.response_of(work)
        parts.append(np.abs(spectrum.y[block] - G * spectrum.u[block]) ** 2 / phi)
    return np.concatenate(parts)
