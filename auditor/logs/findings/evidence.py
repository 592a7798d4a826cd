"""`Evidence`: what the alignment lays before the checks, as arrays; every check reads it and changes nothing."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import TypeAlias

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.findings.base import Finding

ABSENT, EMPTY, CONFLICT, SENTINEL, OUTSIDE, USABLE = range(6)
"""The best that an instant has of a signal: no row, a row without a number, … , a usable value."""

GAP, MANUAL, EXCLUDED, BAD_VALUE, OUT_OF_RANGE = range(1, 6)
"""Why a sample is not valid; 0 is valid."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Trace:
    """One signal, per stamp and on the grid.

    Attributes
    ----------
    role : str
        "measurement", "setpoint", "actuator" or "disturbance".
    name, unit : str
        Its column and unit.
    values : ndarray, shape (M,), [unit]
        Engineering values per stamp, NaN where none is usable.
    state : ndarray of int8, shape (N,)
        `ABSENT` … `USABLE` per instant.
    sampled : ndarray, shape (N,), [unit]
        Value per instant, NaN where none is usable.
    spoiled : mapping of str to ndarray of bool, shape (M,)
        Stamps at which a value was not used: "empty", "conflict", "sentinel", "outside".
    removed : mapping of str to ndarray
        The values themselves that were not used: "sentinel" (raw), "outside" [unit].
    held : bool
        Whether a stored value lasts until the next one.
    stored : str or None
        What the loop file says about how it is stored.
    low, high : float or None
        Plausible range, or the limits of the actuator.
    quantum, deadband : float or None
        Step of the stored values; dead-band of the archive.
    resolution : float or None
        Step the loop file states.
    constant : bool
        True for a signal that is a number in the loop file: nothing was recorded.
    """

    role: str
    name: str
    unit: str
    values: FloatArray
    state: npt.NDArray[np.int8]
    sampled: FloatArray
    spoiled: Mapping[str, BoolArray] = field(default_factory=lambda: MappingProxyType({}))
    removed: Mapping[str, FloatArray] = field(default_factory=lambda: MappingProxyType({}))
    held: bool = False
    stored: str | None = None
    low: float | None = None
    high: float | None = None
    quantum: float | None = None
    deadband: float | None = None
    resolution: float | None = None
    constant: bool = False


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Evidence:
    """A log on its way to a record.

    Attributes
    ----------
    recorded : ndarray of int64, shape (rows,)
        Stamps as recorded [ns since 1970 UTC].
    stray : ndarray of int64
        Stamps left out as no part of the log.
    stamps : ndarray of int64, shape (M,)
        Distinct stamps, ascending.
    repeated, overlapped : ndarray of bool, shape (M,)
        Stamps that occur more than once, and those in stretches a clock ran over twice.
    instant : ndarray of int64, shape (M,)
        Instant each stamp belongs to.
    beats : ndarray of int64, shape (B,)
        Stamps that carry a measurement.
    unevenness : ndarray, shape (B − 1,)
        How far neighbouring beats are from a multiple of `unit` [unit], −0.5…0.5.
    unit, period, log_step, tolerance : float
        Spacing the beats keep, base period, typical spacing of the rows, snapping distance [s].
    regular : bool
        Whether the stamps follow a clock.
    phase_from : str
        "stamps" or "actuator": what the phase of the grid was taken from.
    start : int
        Time of instant 0 [ns since 1970 UTC].
    traces : tuple of Trace
        Measurement, setpoint, actuator, then disturbances.
    manual, excluded : ndarray of bool, shape (N,)
    modes : mapping of str to int
        Values of the mode column that are not automatic, with their rows.
    unmet : tuple of str
        The stated automatic values when none of them occurs in the log, else empty.
    reasons : tuple of str
        The owner's reasons for the exclusions.
    cause : ndarray of int8, shape (N,)
        0 where the sample is valid, else why it is not.
    spans : ndarray of int64, shape (S, 2)
        First and one past the last sample of every span.
    bridge : float
        Longest hole that is held [s].
    """

    recorded: IntArray
    stray: IntArray
    stamps: IntArray
    repeated: BoolArray
    overlapped: BoolArray
    instant: IntArray
    beats: IntArray
    unevenness: FloatArray
    unit: float
    period: float
    log_step: float
    tolerance: float
    regular: bool
    phase_from: str
    start: int
    traces: tuple[Trace, ...]
    manual: BoolArray
    excluded: BoolArray
    modes: Mapping[str, int]
    reasons: tuple[str, ...]
    cause: npt.NDArray[np.int8]
    spans: IntArray
    bridge: float
    unmet: tuple[str, ...] = ()

    def trace(self, role: str) -> Trace:
        """Return the first signal with this role."""
        return next(t for t in self.traces if t.role == role)

    @property
    def recorded_traces(self) -> tuple[Trace, ...]:
        """The signals that are columns of the log."""
        return tuple(t for t in self.traces if not t.constant)

    @property
    def crowded(self) -> int:
        """Beats that are not used because a later one belongs to the same instant."""
        instants = self.instant[np.searchsorted(self.stamps, self.beats)]
        return int(np.sum(instants[1:] == instants[:-1]))

    def time_at(self, sample: int) -> int:
        """Return the time of a sample [ns since 1970 UTC]."""
        return self.start + round(sample * self.period * 1e9)


Check: TypeAlias = Callable[[Evidence], list[Finding]]
"""A check: reads the evidence, returns one finding per kind and signal, or none."""
