"""What a detector is given and what it gives back.

A detector is a module with the names of `Detector`: it marks, per likely plant, where a replay would have been in
danger, and puts the evidence of one stretch into words and numbers. `flags.py` does what all have in common:
counted samples, merging, shares, severity.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np

from auditor.arrays import BoolArray, FloatArray
from auditor.identify.plant import Model
from auditor.identify.thresholds import DIVERGED
from auditor.logs.record import Record, Span
from auditor.loop import Loop
from auditor.replay import Setting
from auditor.text import duration, percent

SEEN = 0.05
"""Share of the likely plants below which a danger is not reported."""

LIKELY = 0.5
"""Share of the likely plants from which a danger is more than something to watch."""

NULL = 1e-6
"""Differences below this share of the error's deviation are rounding: a replay of an exact log returns it to that."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Case:
    """One replay over the likely plants, beside the record it came from.

    Attributes
    ----------
    record, loop, model, setting
        What was replayed, on what, how.
    counted : tuple of Span
        Spans less warm-up: only these samples can be in danger.
    y : ndarray, shape (N, L), [measurement unit]
        Replayed measurement, one lane per likely plant (equally weighted), NaN outside the spans.
    u : ndarray, shape (N, L), [actuator unit]
        Replayed actuator position, NaN outside the spans.
    updated : ndarray of bool, shape (N, L)
        True where the lane updates.
    error : ndarray, shape (N, L), [measurement unit]
        Replayed error r − y.
    is_counted, in_span : ndarray of bool, shape (N,)
    y_range, u_range : (float, float)
        Smallest and largest recorded value inside the spans: what the model was identified on.
    scale : float
        Standard deviation of the recorded error, or what stands for it when it is zero [measurement unit].
    """

    record: Record
    loop: Loop
    model: Model
    counted: tuple[Span, ...]
    setting: Setting
    y: FloatArray
    u: FloatArray
    updated: BoolArray
    error: FloatArray = field(init=False)
    is_counted: BoolArray = field(init=False)
    in_span: BoolArray = field(init=False)
    y_range: tuple[float, float] = field(init=False)
    u_range: tuple[float, float] = field(init=False)
    scale: float = field(init=False)

    def __post_init__(self) -> None:
        is_counted = np.zeros(len(self.record), dtype=np.bool_)
        for span in self.counted:
            is_counted[span.start : span.stop] = True
        object.__setattr__(self, "updated", np.asarray(self.updated, dtype=np.bool_))
        object.__setattr__(self, "error", self.record.r[:, None] - self.y)
        object.__setattr__(self, "is_counted", is_counted)
        object.__setattr__(self, "in_span", self.record.in_span)
        object.__setattr__(self, "y_range", _range(self.record.y[self.in_span]))
        object.__setattr__(self, "u_range", _range(self.record.u[self.in_span]))
        object.__setattr__(self, "scale", self.record.error_deviation or self.loop.limits.band or 1.0)

    @property
    def period(self) -> float:
        """Base period h [s]."""
        return self.record.period

    @property
    def settling(self) -> float:
        """Settling time of the recorded loop [samples]."""
        return self.model.settling_s / self.period

    @property
    def tau_cl(self) -> float:
        """Closed-loop time constant of the recorded loop [samples]."""
        return self.model.tau_cl_s / self.period

    @property
    def tolerance(self) -> float:
        """What cannot be told from nothing [measurement unit]."""
        return NULL * self.scale

    @property
    def measurement_name(self) -> str:
        """What the measurement is called in sentences."""
        return self.loop.signals.measurement.column or "measurement"

    @property
    def actuator_name(self) -> str:
        """What the actuator is called in sentences."""
        return self.loop.signals.actuator.column or "actuator"

    @property
    def unit(self) -> str:
        """Measurement unit."""
        return self.loop.signals.measurement.unit

    @property
    def actuator_unit(self) -> str:
        """Actuator unit."""
        return self.loop.signals.actuator.unit

    def only_counted(self, mask: BoolArray) -> BoolArray:
        """Return a mask of shape (N, L) with the samples taken out that are not counted."""
        return np.asarray(mask & self.is_counted[:, None])


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Stretch:
    """One merged interval: samples start…stop−1.

    Attributes
    ----------
    mask : ndarray of bool, shape (stop − start, L)
        True where the lane is in danger.
    parts : mapping of str to ndarray of bool, shape (stop − start, L)
        The same for each of the detector's clauses.
    period : float
        [s]
    lanes : ndarray of bool, shape (L,)
        True for the likely plants under which it appears.
    share : float
        Share of the likely plants under which it appears.
    duration_s : float
        Time in danger inside the stretch, median over the likely plants under which it appears [s].
    """

    start: int
    stop: int
    mask: BoolArray
    parts: Mapping[str, BoolArray]
    period: float
    lanes: BoolArray = field(init=False)
    share: float = field(init=False)
    duration_s: float = field(init=False)

    def __post_init__(self) -> None:
        samples = self.mask.sum(axis=0)
        lanes = samples > 0
        object.__setattr__(self, "lanes", lanes)
        object.__setattr__(self, "share", float(lanes.mean()))
        object.__setattr__(self, "duration_s", float(np.median(samples[lanes])) * self.period)

    def rows(self, array: FloatArray) -> FloatArray:
        """Rows of `array` (N, …) inside the stretch."""
        return array[self.start : self.stop]

    def lasting(self) -> str:
        """How long and how sure, as every detail says it."""
        return f"for {duration(self.duration_s)} under {percent(self.share)} of the likely plants"


@dataclass(frozen=True, eq=False, slots=True)
class Evidence:
    """Why a stretch is flagged: a sentence, and the same as numbers (`share` and `duration_s` are added for all)."""

    detail: str
    values: Mapping[str, float]


class Detector(Protocol):
    """The names a detector module has."""

    CAUSE: str
    """Name of the cause, as in `audit.json`."""

    MEANING: str
    """What it means, in a few words for tables."""

    def find(self, case: Case) -> dict[str, BoolArray]:
        """Return masks of shape (N, L), one per clause, True where a lane is in danger; none when it does not apply."""

    def may_be_danger(self, case: Case, stretch: Stretch) -> bool:
        """Return False when the stretch is "watch" however many likely plants agree."""

    def describe(self, case: Case, stretch: Stretch) -> Evidence:
        """Put the evidence of one stretch into words and numbers."""


def _range(values: FloatArray) -> tuple[float, float]:
    """Smallest and largest value; nothing is outside the range of an empty array."""
    return (float(values.min()), float(values.max())) if len(values) else (-np.inf, np.inf)


def near_limits(case: Case, stretch: Stretch) -> bool:
    """Return True when the process also comes within one band of its limits while it is in danger.

    That is: under at least half of all likely plants, ỹ < low + band or ỹ > high − band at some sample of the
    stretch at which that plant is in danger. Without a stated band the process has to be outside a limit; without
    limits it never is near one.
    """
    limits = case.loop.limits
    band = limits.band or 0.0
    low = -np.inf if limits.low is None else limits.low + band
    high = np.inf if limits.high is None else limits.high - band
    y = stretch.rows(case.y)
    close = ((y < low) | (y > high)) & stretch.mask
    return bool(close.any(axis=0).mean() >= LIKELY)


def worst(case: Case, amount: FloatArray, mask: BoolArray) -> float:
    """Largest `amount` where `mask` is True, per lane, then the median over the lanes that have one.

    Parameters
    ----------
    amount : ndarray, shape (n, L), [measurement unit]
        Not negative.
    mask : ndarray of bool, shape (n, L)
        With at least one True.
    """
    largest = np.where(mask, amount, 0.0).max(axis=0)[mask.any(axis=0)]
    return float(np.median(np.minimum(largest, DIVERGED * case.scale)))
