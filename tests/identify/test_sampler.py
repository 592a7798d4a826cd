"""The sampler: same seed same members, resampling by weight, bounds kept, and the density it leaves unchanged."""

from __future__ import annotations

import numpy as np
import pytest

from auditor.arrays import read_only
from auditor.identify import sampler, starts
from auditor.identify import spectrum as sp
from auditor.identify.family import INTEGRATOR_POLE, family
from auditor.identify.posterior import chains_at, target
from auditor.identify.prior import tuning
from auditor.kernels import points
from auditor.kernels.chains import generation
from auditor.kernels.spectral import IMPOSSIBLE
from tests.identify.spectral_cases import CONTROLLER, LAG, PERIOD, loop_record
from tests.identify.test_posterior import TRUTH

WEIGHTS = tuning(CONTROLLER, PERIOD, None)


@pytest.fixture(scope="module")
def spectrum():
    return sp.spectrum(loop_record(N=3000), CONTROLLER)


@pytest.fixture(scope="module")
def kinds(spectrum):
    return family(None, spectrum.lowest_frequency)


@pytest.fixture(scope="module")
def density(spectrum, kinds):
    return target(spectrum, kinds, WEIGHTS)


def test_the_same_seed_gives_the_same_members(spectrum, kinds, monkeypatch) -> None:
    for module, name, size in ((sampler, "COOLING", 40), (starts, "STARTS", 600), (starts, "CHAINS", 24)):
        monkeypatch.setattr(module, name, size)  # a short run takes the same steps
    one, same, other = (sampler.run(spectrum, kinds, WEIGHTS, seed) for seed in (3, 3, 4))
    np.testing.assert_array_equal(one.x, same.x)
    np.testing.assert_array_equal(one.kind, same.kind)
    assert not np.array_equal(one.x, other.x)


def test_progress_grows_to_one(spectrum, kinds, monkeypatch) -> None:
    monkeypatch.setattr(starts, "STARTS", 600)
    monkeypatch.setattr(starts, "CHAINS", 24)
    seen: list[float] = []
    sampler.run(spectrum, kinds, WEIGHTS, 1, seen.append)
    assert seen == sorted(seen)
    assert seen[-1] == 1.0


def test_starts_are_possible_and_every_cell_has_its_share(density, kinds) -> None:
    chains = starts.first_chains(density, kinds, LAG, 60.0, np.random.default_rng(1))
    assert len(chains.x) == starts.CHAINS
    assert np.all(chains.log_posterior > IMPOSSIBLE)
    entries = np.bincount(chains.kind[:, 1], minlength=points.ENTRIES)
    # 80 chains in the shares .30 + .09, .12 + .05, .11 four times, rounded by cell, the last one cut.
    assert entries.tolist() == [31, 13, 9, 9, 9, 9]
    assert (chains.kind[:, 0] == points.OSCILLATOR).sum() == 10


def test_a_declared_integrator_stays_one(spectrum) -> None:
    given = family("integrating", spectrum.lowest_frequency)
    weights = tuning(CONTROLLER, PERIOD, "integrating")
    density = target(spectrum, given, weights)
    rng = np.random.default_rng(1)
    chains = starts.first_chains(density, given, LAG, 60.0, rng)
    before = chains.x.copy()
    for _ in range(5):
        generation(chains, sampler.draw_moves(len(chains.x), density, rng), 60.0, density)
    assert np.all(chains.x[:, points.LN_POLE] == np.log(INTEGRATOR_POLE))
    assert np.all(chains.kind[:, 0] < points.OSCILLATOR)
    assert not np.array_equal(chains.x, before)


def test_systematic_resampling_takes_each_as_often_as_its_weight_says() -> None:
    weight = np.array([1.0, 0.0, 5.0, 2.0])
    rng = np.random.default_rng(1)
    counts = np.array([np.bincount(sampler._systematic(weight, rng), minlength=4) for _ in range(2000)])
    expected = 4 * weight / weight.sum()
    assert np.all(np.abs(counts - expected) < 1.0)
    # Each count is one of two neighbours of its expectation: deviation at most 0.5 / sqrt(2000), four of them allowed.
    np.testing.assert_allclose(counts.mean(axis=0), expected, atol=0.045)


def test_a_change_of_temperature_is_carried_over_exactly(density) -> None:
    x = TRUTH + 0.02 * np.random.default_rng(1).normal(size=(5, 8))
    x[:, points.LN_WALK], x[:, points.LN_LAGS] = -10.0, 1.0
    hot = chains_at(x, np.zeros((5, 2), dtype=int), 60.0, density)
    cold = chains_at(x, np.zeros((5, 2), dtype=int), 30.0, density)
    log_weight = np.zeros(5)
    sampler._reweigh(hot, log_weight, 1 / 30 - 1 / 60)
    # Rounding of numbers around 1e3.
    np.testing.assert_allclose(hot.log_posterior, cold.log_posterior, rtol=1e-12)
    np.testing.assert_allclose(log_weight, cold.log_likelihood * (1 / 30 - 1 / 60), rtol=1e-12)


def test_moves_leave_a_flat_density_flat(density, spectrum) -> None:
    """At a very high temperature the record says nothing: coordinates the prior ignores must stay uniform."""
    bare = WEIGHTS._replace(
        excess_above=np.inf, excess_below=np.inf, lag_above=np.inf, lag_below=np.inf, corner_above=np.inf,
        crowding=0.0, at_output=0.0, mid_plant=0.0, oscillatory=0.0, zero=0.0, zero_spread=np.inf,
    )  # fmt: skip
    only_chains = density.allowed.copy()
    only_chains[points.OSCILLATOR] = False
    flat = density._replace(tuning=bare, allowed=read_only(only_chains))
    rng = np.random.default_rng(2)
    n = 60
    x = rng.uniform(flat.low, flat.high, (n, 8))
    x[:, points.LN_GAIN] = -12.0  # so low that no loop is unstable
    low, high = (np.concatenate([[-12.0], bound[1:]]) for bound in (flat.low, flat.high))
    narrow = flat._replace(low=read_only(low), high=read_only(high))
    kind = np.stack([np.full(n, 2), rng.integers(6, size=n)], axis=1)
    chains = chains_at(x, kind, 1e12, narrow)
    seen = []
    for g in range(600):
        generation(chains, sampler.draw_moves(n, narrow, rng), 1e12, narrow)
        if g >= 100 and g % 10 == 0:
            seen.append(np.column_stack([(chains.x - flat.low) / (flat.high - flat.low), chains.kind]))
    seen_all = np.concatenate(seen)
    for coordinate in (points.LN_WALK, points.LN_NOISE, points.LN_CORNER):
        # 3000 correlated draws, a few hundred independent ones: deviation of the mean about 0.289 / sqrt(300) = 0.017.
        assert seen_all[:, coordinate].mean() == pytest.approx(0.5, abs=0.06)
        assert seen_all[:, coordinate].std() == pytest.approx(0.289, abs=0.04)
    kinds_seen = np.zeros((points.STRUCTURES, points.ENTRIES))
    np.add.at(kinds_seen, (seen_all[:, -2].astype(int), seen_all[:, -1].astype(int)), 1.0)
    share = kinds_seen[narrow.allowed] / len(seen_all)
    assert kinds_seen[~narrow.allowed].sum() == 0.0
    # 26 kinds, each expected 1 in 26; as above, some 300 independent draws.
    assert share.max() < 3.0 / 26.0
    assert share.min() > 0.2 / 26.0
