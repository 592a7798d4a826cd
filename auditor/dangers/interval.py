"""`Flag`: a stretch in which triggering would have been dangerous, with its evidence; and merging.

Masks here are `bool`, shape (N, L): sample by lane, True where that lane is in danger. A run is a stretch of True
within one lane; everything works on all lanes at once.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, FloatArray, IntArray


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Flag:
    """One dangerous stretch of one replay.

    Attributes
    ----------
    replay : int
        Index into the audit's replays.
    start, stop : int
        Samples start…stop−1 of the record.
    cause : str
        `limit`, `band`, `silence`, `burst`, `saturation`, `outside-model`, `blind`, …
    severity : str
        "watch" or "danger".
    detail : str
        The evidence in words and numbers.
    values : mapping of str to float
        The evidence as numbers; always has `share`, the share of the likely plants under which it appears.
    """

    replay: int
    start: int
    stop: int
    cause: str
    severity: str
    detail: str
    values: Mapping[str, float]


@dataclass(frozen=True, eq=False, slots=True)
class Runs:
    """Runs of True, lane after lane and in order of time: samples start…stop−1 of `lane`, shape (R,) each."""

    lane: IntArray
    start: IntArray
    stop: IntArray

    @property
    def length(self) -> IntArray:
        """Samples in each run, shape (R,)."""
        return self.stop - self.start

    def where(self, keep: BoolArray) -> Runs:
        """Return the runs marked in `keep`, shape (R,)."""
        return Runs(self.lane[keep], self.start[keep], self.stop[keep])


def find_runs(mask: BoolArray) -> Runs:
    """Return every run of True of a mask of shape (N, L)."""
    samples, lanes = mask.shape
    # One False before the first lane and after each lane keeps runs of neighbouring lanes apart.
    flat = np.zeros(1 + lanes * (samples + 1), dtype=np.bool_)
    flat[1:].reshape(lanes, samples + 1)[:, :samples] = mask.T
    edges = np.flatnonzero(flat[1:] != flat[:-1])
    lane, start = np.divmod(edges[::2], samples + 1)
    return Runs(lane, start, edges[1::2] - lane * (samples + 1))


def paint(runs: Runs, shape: tuple[int, int]) -> BoolArray:
    """Return the mask of shape (N, L) that is True inside the runs; they may overlap and stick out at either end."""
    samples, lanes = shape
    first = runs.lane * (samples + 1)
    change = np.zeros(lanes * (samples + 1), dtype=np.int32)
    one = np.int32(1)  # of the array's own type: anything else takes a path twenty times slower
    np.add.at(change, first + np.clip(runs.start, 0, samples), one)
    np.subtract.at(change, first + np.clip(runs.stop, 0, samples), one)
    # Every run ends inside its lane, so that one sum over all lanes is zero at the start of each.
    inside = np.cumsum(change, out=change) > 0
    return np.ascontiguousarray(inside.reshape(lanes, samples + 1)[:, :samples].T)


def longer_than(mask: BoolArray, samples: float) -> BoolArray:
    """Keep the runs of a mask of shape (N, L) that last longer than `samples`."""
    runs = find_runs(mask)
    long = runs.length > samples
    if long.all():
        return mask
    return paint(runs.where(long), mask.shape) if long.any() else np.zeros_like(mask)


def longest_run(mask: BoolArray) -> IntArray:
    """Length of the longest run of each lane of a mask of shape (N, L), shape (L,) [samples]."""
    runs = find_runs(mask)
    longest = np.zeros(mask.shape[1], dtype=np.int64)
    np.maximum.at(longest, runs.lane, runs.length)
    return longest


def widened(mask: BoolArray, reach: int) -> BoolArray:
    """True within `reach` samples of a True, shape (N,)."""
    runs = find_runs(mask[:, None])
    return paint(Runs(runs.lane, runs.start - reach, runs.stop + reach), (len(mask), 1))[:, 0]


def merged(samples: IntArray, apart: float) -> list[tuple[int, int]]:
    """Return the intervals (start, stop) that cover `samples` (ascending), merged when closer than `apart` samples."""
    if not len(samples):
        return []
    between = np.diff(samples) - 1
    cut = np.flatnonzero((between > 0) & (between >= apart))
    starts = samples[np.r_[0, cut + 1]]
    stops = samples[np.r_[cut, len(samples) - 1]] + 1
    return list(zip(starts.tolist(), stops.tolist(), strict=True))


def shared_intervals(mask: BoolArray, apart: float, share: float) -> list[tuple[int, int]]:
    """Return the intervals in which at least `share` of the lanes are in danger, in order of time.

    A sample counts when that many lanes are in danger within `apart` samples of it: likely plants meet the same
    event at slightly different times, and one odd plant that is in danger all along must not stretch every interval.

    Parameters
    ----------
    mask : ndarray of bool, shape (N, L)
    apart : float
        Intervals closer than this are one [samples].
    share : float
        Smallest share of the lanes with a True inside an interval, 0…1.
    """
    rows = np.flatnonzero(mask.any(axis=1))
    if not len(rows):
        return []
    near = _share_near(mask[rows], rows, apart)
    intervals = merged(rows[near >= share], apart)
    return [(start, stop) for start, stop in intervals if mask[start:stop].any(axis=0).mean() >= share]


def _share_near(mask: BoolArray, rows: IntArray, reach: float) -> FloatArray:
    """Share of lanes with a True within `reach` samples of each of the `rows` that `mask` holds, shape (R,)."""
    total = np.zeros((len(rows) + 1, mask.shape[1]), dtype=np.int32)
    np.cumsum(mask, axis=0, out=total[1:])
    first = np.searchsorted(rows, rows - reach, side="left")
    last = np.searchsorted(rows, rows + reach, side="right")
    return np.asarray((total[last] > total[first]).mean(axis=1))


def covered_samples(flags: Iterable[Flag]) -> int:
    """Return how many samples lie in at least one of the flags."""
    end, total = 0, 0
    for start, stop in sorted((flag.start, flag.stop) for flag in flags):
        total += max(0, stop - max(start, end))
        end = max(end, stop)
    return total
