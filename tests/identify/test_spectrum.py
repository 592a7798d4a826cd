"""Binned spectra against the same written out for one span, and what several spans add."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from auditor.controllers.pid import Pid
from auditor.errors import CannotAnswerError
from auditor.identify import spectrum as sp
from auditor.logs.record import Span
from tests.identify.spectral_cases import CONTROLLER, LAG, PERIOD, loop_record, record_of, reversed_action


@pytest.fixture(scope="module")
def record():
    return loop_record()


def all_bins(spectrum, keep=None):
    return sp.binned(spectrum, np.ones(len(spectrum.w), dtype=bool) if keep is None else keep, 10)


def test_one_span_is_binned_as_written_out(record) -> None:
    N = len(record)
    length = int(0.05 * N)
    taper = np.ones(N)
    taper[:length] = 0.5 - 0.5 * np.cos(np.pi * (np.arange(length) + 0.5) / length)
    taper[N - length :] = taper[:length][::-1]
    norm = np.sqrt(np.sum(taper**2))
    Y = np.fft.rfft(taper * (record.y - record.y.mean())) / norm
    U = np.fft.rfft(taper * (record.u - record.u.mean())) / norm / CONTROLLER.gain
    w = 2.0 * np.pi * np.arange(len(Y)) / N
    first = np.flatnonzero(w >= 0.3 / LAG)[0]
    second = max(first + 2, np.flatnonzero(w >= 1.015 * w[first])[0])
    n = (second - first) * norm**4 / (N * np.sum(taper**4))
    expected = [
        np.mean(np.abs(Y[first:second]) ** 2), np.mean(np.abs(U[first:second]) ** 2),
        np.mean((U.conj() * Y)[first:second].real), np.mean((U.conj() * Y)[first:second].imag), n,
    ]  # fmt: skip
    bins = all_bins(sp.spectrum(record, CONTROLLER))
    # Twelve frequencies below the data come first. Sums in another order.
    np.testing.assert_allclose(bins.measured[:, 12], expected, rtol=1e-12)
    assert bins.cosine[1, 12] == pytest.approx(np.cos(w[first:second].mean()), rel=1e-13)


def test_bins_grow_hold_two_ordinates_and_end_at_the_highest_frequency(record) -> None:
    spectrum = sp.spectrum(record, CONTROLLER)
    assert np.diff(spectrum.edges).min() >= 2
    starts = spectrum.w[spectrum.edges]
    resolution = 2.0 * np.pi / len(record)
    assert np.all(np.diff(starts) <= np.minimum(0.015 * starts[:-1], 0.012) + 2.0 * resolution)
    assert 2.5 <= starts[-1] < 2.5 + 0.012 + resolution


def test_frequencies_without_data_carry_no_weight(record) -> None:
    bins = all_bins(sp.spectrum(record, CONTROLLER))
    empty = bins.measured[4] == 0.0
    assert empty.sum() == 14
    assert empty[:12].all()
    assert empty[-2:].all()


def test_white_noise_has_its_variance_at_every_frequency() -> None:
    rng = np.random.default_rng(7)
    white = record_of(3.0 * rng.normal(size=20_000), rng.normal(size=20_000))
    bins = all_bins(sp.spectrum(white, CONTROLLER))
    n = bins.measured[4]
    # Mean of some 7 500 exponential ordinates: standard deviation 1.2 %, four of them allowed.
    assert np.sum(n * bins.measured[0]) / n.sum() == pytest.approx(9.0, rel=0.05)


def test_two_equal_spans_count_twice(record) -> None:
    twice = record_of(np.tile(record.y, 2), np.tile(record.u, 2))
    N = len(record)
    twice = replace(twice, spans=(Span(0, N), Span(N, 2 * N)))
    one = sp.spectrum(record, CONTROLLER)
    both = sp.spectrum(twice, CONTROLLER)
    assert len(both.w) == 2 * len(one.w)
    assert both.weight.sum() == pytest.approx(2.0 * one.weight.sum(), rel=1e-12)
    np.testing.assert_array_equal(both.y[::2], one.y)
    np.testing.assert_array_equal(both.y[1::2], one.y)


def test_a_short_span_is_left_out(record) -> None:
    cut = replace(record, spans=(Span(0, 5000), Span(5001, 5001 + sp.SHORTEST_SPAN - 1)))
    assert sp.usable_spans(cut) == (Span(0, 5000),)
    assert set(sp.spectrum(cut, CONTROLLER).span) == {0}


def test_an_actuator_of_the_other_sign_gives_the_same_bins(record) -> None:
    same = all_bins(sp.spectrum(record, CONTROLLER))
    turned = all_bins(sp.spectrum(reversed_action(record), replace(CONTROLLER, gain=-CONTROLLER.gain)))
    np.testing.assert_array_equal(turned.measured, same.measured)
    np.testing.assert_array_equal(turned.controller, same.controller)


def test_without_integral_action_the_span_sets_the_lowest_frequency(record) -> None:
    lowest = sp.spectrum(record, Pid(gain=2.0)).lowest_frequency
    assert lowest == pytest.approx(8.0 * np.pi / len(record), rel=1e-12)


def test_dropped_ordinates_leave_the_bin(record) -> None:
    spectrum = sp.spectrum(record, CONTROLLER)
    keep = np.ones(len(spectrum.w), dtype=bool)
    keep[spectrum.edges[3]] = False
    keep[spectrum.edges[5] : spectrum.edges[6]] = False
    full, part = all_bins(spectrum), all_bins(spectrum, keep)
    assert part.measured[4, 12 + 3] == pytest.approx(full.measured[4, 12 + 3] - spectrum.weight[0], rel=1e-12)
    assert np.all(part.measured[:, 12 + 5] == 0.0)
    np.testing.assert_array_equal(part.measured[:, 12 + 6], full.measured[:, 12 + 6])


def test_share_of_closed_loop_leaves_out_samples_at_a_limit(record) -> None:
    low, high = np.quantile(record.u, [0.1, 0.8])
    limited = replace(record, u=np.clip(record.u, low, high), low=low, high=high)
    inside = float(np.mean((record.u > low) & (record.u < high)))
    assert 0.6 < inside < 0.8
    assert sp.closed_share(limited, limited.spans) == pytest.approx(inside, abs=1e-12)
    assert sp.closed_share(record, record.spans) == 1.0


def test_everything_that_is_wrong_is_told_at_once(record) -> None:
    still = replace(record, y=np.zeros(len(record)), spans=(Span(0, 511), Span(600, 700)))
    with pytest.raises(CannotAnswerError) as caught:
        sp.spectrum(still, Pid(gain=0.0))
    assert len(caught.value.problems) == 2
    assert "511 samples" in str(caught.value)
    with pytest.raises(CannotAnswerError, match="measurement stands still"):
        sp.spectrum(replace(still, spans=record.spans), CONTROLLER)


def test_time_is_counted_in_base_periods(record) -> None:
    assert sp.spectrum(record, CONTROLLER).lowest_frequency >= 0.3 * PERIOD / CONTROLLER.integral_time
