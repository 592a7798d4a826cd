"""Load patterns: what they add up to."""

from __future__ import annotations

import numpy as np
import pytest

from auditor.synthetic import between, drift, fine_times, opened, pulses


def test_times_and_steps():
    times = fine_times(3, 2.0, 4)
    assert times.tolist() == [[0, 0.5, 1, 1.5], [2, 2.5, 3, 3.5], [4, 4.5, 5, 5.5]]
    assert between(times, 1.0, 2.0).ravel().tolist() == [0, 0, 1, 1, 1, 1, 0, 0, 0, 0, 0, 0]
    assert opened(times, 1.0, 2.0, 1.0).ravel().tolist() == [0, 0, 0, 0.5, 1, 1, 1, 0.5, 0, 0, 0, 0]


def test_drift_has_unit_deviation_and_its_time_constant():
    values = drift(np.random.default_rng(1), fine_times(50_000, 1.0, 4), 5.0).ravel()
    # 50 000 s hold about 5 000 independent values (two time constants each): the deviation is known to 1 %.
    assert values.std() == pytest.approx(1.0, abs=0.04)
    # Correlation over one time constant is 1/e; its error is of the same order.
    assert np.corrcoef(values[:-20], values[20:])[0, 1] == pytest.approx(np.exp(-1.0), abs=0.04)


def test_pulses_draw_what_their_number_size_and_length_say():
    drawn = pulses(np.random.default_rng(2), fine_times(50_000, 1.0, 4), every=10.0, length=3.0)
    # 5 000 users of mean size 1 and length 3 in 50 000: mean 0.3, known to 1.5 % of itself.
    assert drawn.mean() == pytest.approx(0.3, abs=0.02)
    assert drawn.min() == pytest.approx(0.0, abs=1e-9)
