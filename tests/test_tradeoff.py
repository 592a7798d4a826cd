"""The best clock that uses no more updates, by hand."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from auditor.tradeoff import ClockCurve, best_clock, compare, divisors_for

COUNTS = np.array([100.0, 50.0, 25.0])


def test_between_two_clocks_time_is_shared() -> None:
    # Half of the way from 50 to 100 updates: the mean of their mean squares.
    assert best_clock(COUNTS, np.array([1.0, 3.0, 9.0]), 75.0) == pytest.approx(2.0)


def test_a_slower_clock_may_be_the_best_one() -> None:
    assert best_clock(COUNTS, np.array([1.0, 9.0, 4.0]), 50.0) == 4.0


def test_no_clock_is_slow_enough() -> None:
    assert np.isnan(best_clock(COUNTS, np.array([1.0, 3.0, 9.0]), 10.0))


def test_a_rule_beats_a_clock_that_ran_away_and_the_distance_is_not_told() -> None:
    squares = np.repeat(np.array([1.0, np.inf, np.inf])[:, None], 24, axis=1)
    found = compare(curve(squares), "whole", np.full(24, 50.0), np.full(24, 4.0))
    assert found.outcome == "better"
    assert found.clock_rms is None
    assert found.difference90 is not None
    assert found.difference90[0] == -np.inf


def test_a_clock_that_ran_away_is_not_shared_with() -> None:
    assert best_clock(COUNTS, np.array([np.inf, 3.0, 9.0]), 75.0) == 3.0


def curve(squares: np.ndarray) -> ClockCurve:
    draws = squares.shape[1]
    return ClockCurve(
        every=(1, 2, 4), counts={"whole": np.repeat(COUNTS[:, None], draws, axis=1)}, squares={"whole": squares}
    )


def test_better_worse_and_unclear_follow_the_interval_of_the_difference() -> None:
    squares = np.repeat(np.array([1.0, 4.0, 16.0])[:, None], 24, axis=1)
    at = np.full(24, 50.0)
    assert compare(curve(squares), "whole", at, np.full(24, 1.0)).outcome == "better"
    assert compare(curve(squares), "whole", at, np.full(24, 9.0)).outcome == "worse"
    mixed = np.r_[np.full(12, 1.0), np.full(12, 9.0)]
    found = compare(curve(squares), "whole", at, mixed)
    assert found.outcome == "unclear"
    assert found.clock_rms == pytest.approx(2.0)


def test_equal_errors_are_not_called_better() -> None:
    squares = np.repeat(np.array([1.0, 4.0, 16.0])[:, None], 24, axis=1)
    assert compare(curve(squares), "whole", np.full(24, 50.0), np.full(24, 4.0)).outcome == "unclear"


def test_divisors_reach_the_fewest_updates() -> None:
    every = divisors_for(fewest=20.0, samples=1000)
    assert every[:8] == (1, 2, 3, 4, 5, 6, 7, 8)
    assert every[-1] >= 51
    assert all(b > a for a, b in pairwise(every))
