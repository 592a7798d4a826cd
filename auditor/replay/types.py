"""What a replay is asked and what it answers."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from auditor.arrays import BoolArray, FloatArray


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Setting:
    """One rule at one setting on one link.

    `values` holds the rule's own settings by contract name (durations end in `_s`); guards are [s].
    """

    rule: str
    link: str = "sensor"
    signal: str = "error"
    between: str = "hold"
    values: Mapping[str, float] = field(default_factory=lambda: MappingProxyType({}))
    min_gap_s: float | None = None
    max_silence_s: float | None = None

    @property
    def settings(self) -> dict[str, float | str]:
        """Settings as `audit.json` lists them."""
        listed: dict[str, float | str] = dict(self.values)
        if self.min_gap_s is not None:
            listed["min_gap_s"] = self.min_gap_s
        if self.max_silence_s is not None:
            listed["max_silence_s"] = self.max_silence_s
        if self.signal != "error":
            listed["signal"] = self.signal
        if self.between != "hold":
            listed["between"] = self.between
        return listed


@dataclass(frozen=True, slots=True, kw_only=True)
class Measures:
    """What `audit.json` calls {measures}: all over counted samples, gaps inside spans only."""

    updates: float
    updates_per_hour: float
    saved_fraction: float
    rms_error: float
    iae_per_hour: float
    max_abs_error: float
    outside_band_s: float | None
    outside_limits_s: float | None
    min_gap_s: float | None
    median_gap_s: float | None
    max_gap_s: float | None
    peak_updates_per_hour: float
    actuator_travel: float
    saturated_s: float
    hours: float


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Series:
    """One replayed member over the whole record: shape (N,) each, NaN outside the spans."""

    y: FloatArray
    u: FloatArray
    updated: BoolArray


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Replay:
    """The answer for one setting.

    Attributes
    ----------
    setting : Setting
    measures : Measures
        Median over the ensemble of each measure.
    interval90 : mapping of str to (float, float)
        `updates`, `rms_error`, `iae_per_hour`, `max_abs_error`.
    first, rest : Measures
        The same measures on the part where a setting is chosen (first 60 % of the counted time) and on the rest.
    by_period : tuple of (str, Measures)
        Per calendar month, for logs over two months.
    answerable : bool
    refusal : str or None
        Why the log cannot answer this setting, with the number that failed.
    trust : str
        "good", "limited" or "none", from the width of the answer's own interval; in an audit never above the model's.
    naive_updates, naive_rms_error : float
        The same with the model left out (G = 0).
    against_periodic : str
        "better", "worse" or "unclear" against the best clock that uses no more updates.
    periodic_rms_error : float or None
        RMS error of that clock (None when even the slowest clock replayed uses more updates).
    rms_difference90 : (float, float) or None
        90 % interval of (rule − clock) in RMS error.
    members : mapping of str to ndarray, shape (draws,)
        `updates` and `rms_error` of every draw.
    median_member : int
        The draw whose count is the median; series and pictures show it.
    series : Series or None
        Of that draw.
    """

    setting: Setting
    measures: Measures
    interval90: Mapping[str, tuple[float, float]]
    first: Measures
    rest: Measures
    by_period: tuple[tuple[str, Measures], ...]
    answerable: bool
    refusal: str | None
    trust: str
    naive_updates: float
    naive_rms_error: float
    members: Mapping[str, FloatArray]
    against_periodic: str = "unclear"
    periodic_rms_error: float | None = None
    rms_difference90: tuple[float, float] | None = None
    against_periodic_rest: str = "unclear"
    interval90_first: Mapping[str, tuple[float, float]] = field(default_factory=lambda: MappingProxyType({}))
    interval90_rest: Mapping[str, tuple[float, float]] = field(default_factory=lambda: MappingProxyType({}))
    against_periodic_first: str = "unclear"
    median_member: int = 0
    series: Series | None = None
