"""The density: likelihood against complex numpy, prior by hand, bounds, mask, and the same without compilation."""

from __future__ import annotations

import os
import subprocess
import sys
from dataclasses import replace

import numpy as np
import pytest

from auditor.arrays import read_only
from auditor.controllers.pid import Pid
from auditor.identify import spectrum as sp
from auditor.identify.family import family, to_plant
from auditor.identify.loop_math import controller_spectrum, plant_spectrum
from auditor.identify.posterior import chains_at, target, unspoilt
from auditor.identify.prior import tuning
from auditor.kernels import points
from auditor.kernels.prior import log_prior
from auditor.kernels.spectral import IMPOSSIBLE, WORK_ROWS, log_likelihood
from tests.identify.spectral_cases import CONTROLLER, DELAY, GAIN, LAG, PERIOD, loop_record, random_point

KINDS = family(None, 0.01)
WEIGHTS = tuning(CONTROLLER, PERIOD, None)
PAIRS = [(int(m), int(entry)) for m, entry in zip(*KINDS.allowed.nonzero(), strict=True)]

TRUTH = np.array([
    np.log(GAIN / LAG * CONTROLLER.gain), -np.log(LAG), 0.0, DELAY, np.log(0.02), -14.0,
    np.log(0.02**2 / (0.05 * GAIN / LAG) ** 2), 0.0,
])  # fmt: skip


@pytest.fixture(scope="module")
def spectrum():
    return sp.spectrum(loop_record(), CONTROLLER)


def load_power(x, m: int, entry: int, q):
    """|H|² from the textbook: what follows the load's entry, sampled lag by lag where it is not the whole plant."""
    kv, p, T = np.exp(x[:3])
    long = (kv * (1 - np.exp(-p)) / p) / (1 - np.exp(-p) * q)
    short = ((1 - np.exp(-m / T)) / (1 - np.exp(-m / T) * q)) if m else 1.0
    whole = plant_spectrum(to_plant(np.where(np.arange(8) == 3, 0.0, x), (m, 0), 1.0, 1.0, KINDS), -np.angle(q))
    path = {0: whole, 1: kv, 2: long, 3: kv * short**m, 4: long * short ** (m // 2), 5: whole}[entry]
    return np.abs(path) ** 2 * np.ones(len(q))


def written_out(x, m: int, entry: int, spectrum) -> tuple[float, float]:
    """Likelihood and peak in complex numpy, one bin list, no workspace."""
    bins = sp.binned(spectrum, np.ones(len(spectrum.w), dtype=bool), 45)
    syy, suu, re, im, n = bins.measured
    w = np.arccos(bins.cosine[1])
    q = np.exp(-1j * w)
    G = plant_spectrum(to_plant(x, (m, 0), 1.0, 1.0, KINDS), w)
    S = 1.0 / (1.0 + G * controller_spectrum(CONTROLLER, PERIOD, w) / CONTROLLER.gain)
    H2, kv2 = load_power(x, m, entry, q), np.exp(2 * x[0])
    ar, walk = 1 / np.abs(1 - (1 - np.exp(x[4])) * q) ** 2, np.exp(x[5]) / np.abs(1 - q) ** 2
    phi = H2 * ar + (kv2 if entry == 5 else H2) * walk + np.exp(x[6]) * kv2
    E = (syy - 2 * (np.conj(G) * (re + 1j * im)).real + np.abs(G) ** 2 * suu) / phi
    N = n.sum()
    likelihood = -N * np.log(np.sum(n * E) / N) - np.sum(n * (np.log(phi) + 2 * spectrum.closed * np.log(np.abs(S))))
    return likelihood, np.abs(S).max()


def at(x, m: int, entry: int, spectrum) -> tuple[float, float]:
    bins = target(spectrum, KINDS, WEIGHTS).bins
    return log_likelihood(x, m, entry, bins, np.empty((WORK_ROWS, bins.measured.shape[1])))


@pytest.mark.parametrize(("m", "entry"), PAIRS)
@pytest.mark.parametrize("closed", [1.0, 0.7])
def test_likelihood_is_the_one_written_out(m: int, entry: int, closed: float, spectrum) -> None:
    x = random_point(np.random.default_rng(100 * m + entry), m)
    x[points.LN_GAIN] -= 4.0  # low enough for a stable loop whatever the delay
    partly = replace(spectrum, closed=closed)
    expected, peak = written_out(x, m, entry, partly)
    found, found_peak = at(x, m, entry, partly)
    # Some ten thousand ordinates of order one; the frequency is recovered by arccos, good to 1e-12 at low frequency.
    assert found == pytest.approx(expected, rel=1e-8)
    assert found_peak == pytest.approx(peak, rel=1e-8)


def test_the_truth_is_more_likely_than_its_neighbours(spectrum) -> None:
    best = at(TRUTH, 0, points.AT_INPUT, spectrum)[0]
    for coordinate, step in ((points.LN_GAIN, 0.2), (points.DELAY, 1.0), (points.LN_NOISE, 0.3)):
        for sign in (-1.0, 1.0):
            x = TRUTH.copy()
            x[coordinate] += sign * step
            # Setpoint steps pin gain and delay, ordinates at high frequency the noise, far better than this.
            assert at(x, 0, points.AT_INPUT, spectrum)[0] < best - 5.0


def test_an_unstable_loop_is_impossible(spectrum) -> None:
    x = TRUTH.copy()
    x[points.LN_GAIN] += 2.0
    assert at(x, 0, points.AT_INPUT, spectrum)[0] == IMPOSSIBLE


def test_what_is_out_of_bounds_or_does_not_exist_is_impossible(spectrum) -> None:
    outside = TRUTH.copy()
    outside[points.LN_CORNER] = -0.6
    x = np.stack([TRUTH, outside, TRUTH, TRUTH])
    kind = np.array([[0, 0], [0, 0], [0, points.AFTER_SHORT_LAGS], [points.OSCILLATOR, points.AT_BOTH_ENDS]])
    found = chains_at(x, kind, 2.0, target(spectrum, KINDS, WEIGHTS)).log_posterior
    assert found[0] > IMPOSSIBLE
    assert np.all(found[1:] == IMPOSSIBLE)


def test_the_posterior_is_tempered_likelihood_plus_prior(spectrum) -> None:
    density = target(spectrum, KINDS, WEIGHTS)
    chains = chains_at(TRUTH[None], np.array([[0, 0]]), 3.0, density)
    likelihood, peak = at(TRUTH, 0, 0, spectrum)
    assert chains.log_likelihood[0] == likelihood
    assert chains.log_posterior[0] == likelihood / 3.0 + log_prior(TRUTH, 0, 0, peak, WEIGHTS)


def point(**more: float) -> np.ndarray:
    """A point at which every term of the prior is zero, with some coordinates changed."""
    x = {"ln_gain": 0.0, "ln_pole": -np.log(LAG) - 0.1, "ln_lags": 0.0, "ln_corner": -5.0, "zero": 0.0} | more
    return np.array([x["ln_gain"], x["ln_pole"], x["ln_lags"], 3.0, x["ln_corner"], -9.0, 0.0, x["zero"]])


@pytest.mark.parametrize(
    ("x", "m", "entry", "peak", "expected"),
    [
        (point(), 0, 0, 1.5, 0.0),
        (point(), 0, 0, 1.5 + 0.5 * (np.e - 1), -0.5 / 0.6**2),  # one e-fold more excess
        (point(), 0, 0, 1 + 0.5 / np.e, -0.5 / 1.2**2),
        (point(), 0, 0, 1.0, -0.5 * (np.log(1e-3 / 0.5) / 1.2) ** 2),  # floored
        (point(ln_pole=-np.log(LAG) - 0.6), 0, 0, 1.5, -0.5 * (0.5 / 0.7) ** 2),  # lag half an e-fold longer
        (point(ln_pole=-np.log(LAG) - 3.1), 0, 0, 1.5, -1.0),  # an integrator: longer says no more
        (point(ln_pole=-np.log(LAG) + 0.9), 0, 0, 1.5, -0.5 / 0.35**2),
        (point(ln_gain=-5.5), 0, 0, 1.5, -0.5 * (0.5 / 0.6) ** 2),  # load corner above kv
        (point(ln_gain=-5.5), 0, 1, 1.5, -1.5),  # no such term for a load at the output
        (point(ln_gain=-5.5), 1, 5, 1.5, -2.0 - 0.5 * (0.5 / 0.6) ** 2),
        (point(), 1, 2, 1.5, -2.0),
        (point(ln_lags=np.log(3 * LAG) + 0.3), 3, 4, 1.5, -2.0 - 2.0 * 0.2),  # each lag 0.2 above 1/p
        (point(zero=3.0), 1, 1, 1.5, -1.5),
        (point(zero=-11.0), 1, 1, 1.5, -1.5 - 4.0 - 0.5),
        (point(ln_pole=-0.3, ln_gain=-9.0), points.OSCILLATOR, 0, 1.5, -2.0),
        (point(ln_pole=-0.3), points.OSCILLATOR, 1, 1.5, -3.5),
    ],
)
def test_prior_by_hand(x, m: int, entry: int, peak: float, expected: float) -> None:
    assert log_prior(x, m, entry, peak, WEIGHTS) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("weights", [tuning(CONTROLLER, PERIOD, "integrating"), tuning(Pid(gain=1.0), PERIOD, None)])
def test_where_there_is_no_lag_to_compare_the_lag_says_nothing(weights) -> None:
    assert log_prior(point(ln_pole=-8.0), 0, 0, 1.5, weights) == 0.0


def test_a_line_in_the_spectrum_is_masked(spectrum) -> None:
    clean = unspoilt(spectrum, TRUTH, np.array([0, 0]))
    # An exponential ordinate exceeds twelve times its mean once in 160 000.
    assert np.sum(~clean) <= 1
    k = int(spectrum.edges[40])
    y = spectrum.y.copy()
    y[k] += 100.0 * np.abs(y[k - 20 : k + 20]).max()
    spoilt = unspoilt(replace(spectrum, y=read_only(y)), TRUTH, np.array([0, 0]))
    assert not spoilt[k]
    assert np.sum(~spoilt) <= 2


UNCOMPILED = """
import numpy as np
from tests.identify.test_posterior import one_generation
print(" ".join(float(v).hex() for v in one_generation()))
"""


def one_generation() -> np.ndarray:
    """Six chains, evaluated and moved once, over every tenth bin's worth of record."""
    from auditor.identify.sampler import draw_moves
    from auditor.kernels.chains import generation

    short = sp.spectrum(loop_record(N=600, moves=1), CONTROLLER)
    density = target(short, KINDS, WEIGHTS)
    rng = np.random.default_rng(4)
    x = TRUTH + 0.05 * rng.normal(size=(6, 8))
    x[:, [points.LN_LAGS, points.LN_WALK]] = [np.log(4.0), -10.0]
    chains = chains_at(x, np.array([[m, 1] for m in range(6)]), 60.0, density)
    generation(chains, draw_moves(6, density, rng), 60.0, density)
    return np.concatenate([chains.x.ravel(), chains.log_posterior])


def test_without_compilation_the_same_numbers_come_out() -> None:
    environment = os.environ | {"NUMBA_DISABLE_JIT": "1"}
    done = subprocess.run(
        [sys.executable, "-c", UNCOMPILED], env=environment, capture_output=True, text=True, check=True
    )
    plain = np.array([float.fromhex(word) for word in done.stdout.split()])
    # Same operations in the same order; only exp and log may come from another library and differ in the last digit.
    np.testing.assert_allclose(plain, one_generation(), rtol=1e-11)
