"""Runs, intervals and what they cover, against plain loops."""

from __future__ import annotations

from itertools import pairwise
from types import MappingProxyType

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import array_shapes, arrays

from auditor.arrays import BoolArray, IntArray
from auditor.dangers.interval import (
    Flag,
    Runs,
    covered_samples,
    find_runs,
    longer_than,
    longest_run,
    merged,
    paint,
    shared_intervals,
    widened,
)

MASKS = arrays(np.bool_, array_shapes(min_dims=2, max_dims=2, min_side=1, max_side=30))


def plain_runs(mask: BoolArray) -> list[tuple[int, int, int]]:
    """Runs by walking through every lane."""
    found = []
    for lane in range(mask.shape[1]):
        start = None
        for k in range(mask.shape[0] + 1):
            inside = k < mask.shape[0] and mask[k, lane]
            if inside and start is None:
                start = k
            if not inside and start is not None:
                found.append((lane, start, k))
                start = None
    return found


@given(MASKS)
@settings(max_examples=60, deadline=None)
def test_runs_are_those_a_walk_finds_and_paint_back_to_the_mask(mask: BoolArray) -> None:
    runs = find_runs(mask)
    assert list(zip(runs.lane, runs.start, runs.stop, strict=True)) == plain_runs(mask)
    np.testing.assert_array_equal(paint(runs, mask.shape), mask)


@given(MASKS, st.floats(0, 8))
@settings(max_examples=60, deadline=None)
def test_long_and_longest_runs_agree_with_a_walk(mask: BoolArray, samples: float) -> None:
    expected = np.zeros_like(mask)
    longest = np.zeros(mask.shape[1])
    for lane, start, stop in plain_runs(mask):
        longest[lane] = max(longest[lane], stop - start)
        if stop - start > samples:
            expected[start:stop, lane] = True
    np.testing.assert_array_equal(longer_than(mask, samples), expected)
    np.testing.assert_array_equal(longest_run(mask), longest)


def test_painted_runs_may_overlap_and_stick_out() -> None:
    runs = Runs(np.array([0, 0, 1]), np.array([-3, 1, 4]), np.array([2, 3, 9]))
    expected = np.array([[1, 1, 1, 0, 0], [0, 0, 0, 0, 1]], dtype=bool).T
    np.testing.assert_array_equal(paint(runs, (5, 2)), expected)


def test_widened_reaches_both_ways() -> None:
    mask = np.zeros(10, dtype=bool)
    mask[[1, 7]] = True
    assert np.flatnonzero(widened(mask, 2)).tolist() == [0, 1, 2, 3, 5, 6, 7, 8, 9]


@pytest.mark.parametrize(
    ("apart", "expected"),
    [
        (0.0, [(2, 4), (7, 8), (11, 12)]),
        (3.0, [(2, 4), (7, 8), (11, 12)]),  # exactly the distance: not closer, so not merged
        (3.1, [(2, 12)]),
    ],
)
def test_intervals_closer_than_the_distance_are_one(apart: float, expected: list[tuple[int, int]]) -> None:
    assert merged(np.array([2, 3, 7, 11]), apart) == expected


def test_nothing_marked_gives_no_interval() -> None:
    assert merged(np.array([], dtype=np.int64), 5.0) == []
    assert shared_intervals(np.zeros((30, 4), dtype=bool), 5.0, 0.05) == []


@given(
    arrays(np.int64, st.tuples(st.integers(1, 80), st.integers(1, 30)), elements=st.integers(0, 25)),
    st.floats(0, 12),
)
@settings(max_examples=150, deadline=None)
def test_shared_intervals_are_sorted_apart_and_cover_what_enough_lanes_share(draws: IntArray, apart: float) -> None:
    mask = draws == 0
    intervals = shared_intervals(mask, apart, 0.05)
    for (_, stop), (start, _) in pairwise(intervals):
        assert start > stop
        assert start - stop >= apart
    covered = np.zeros(len(mask), dtype=bool)
    for start, stop in intervals:
        assert mask[start].any()
        assert mask[stop - 1].any()
        assert mask[start:stop].any(axis=0).mean() >= 0.05
        covered[start:stop] = True
    assert covered[mask.mean(axis=1) >= 0.05].all()


def test_one_odd_lane_does_not_stretch_every_interval() -> None:
    mask = np.zeros((300, 24), dtype=bool)
    mask[:, 0] = True
    mask[100:110, 1:] = True
    # The odd lane adds at most the distance on either side: there it is near the others.
    assert shared_intervals(mask, 8.0, 0.05) == [(92, 118)]


def test_lanes_that_meet_an_event_at_different_times_count_together() -> None:
    mask = np.zeros((300, 24), dtype=bool)
    mask[100, 0] = mask[105, 1] = True
    assert shared_intervals(mask, 8.0, 0.05) == [(100, 106)]
    assert shared_intervals(mask, 4.0, 0.05) == []


def test_an_interval_keeps_its_own_share() -> None:
    mask = np.zeros((300, 48), dtype=bool)
    mask[90, 0] = mask[100, 1] = mask[110, 2] = True
    # Three of 48 are near sample 100, but only one of them inside the interval that leaves.
    assert shared_intervals(mask, 15.0, 0.05) == []


def test_samples_in_several_flags_count_once() -> None:
    def flag(start: int, stop: int) -> Flag:
        nothing = MappingProxyType({"share": 1.0})
        return Flag(replay=0, start=start, stop=stop, cause="band", severity="watch", detail="", values=nothing)

    assert covered_samples([flag(10, 20), flag(0, 4), flag(12, 15), flag(18, 25)]) == 19
    assert covered_samples([]) == 0
