"""`Record`: the log on the loop's own clock, with what was found in it.

Sample k is at ``start + k·period``. `valid` says where r, y and u may be used; `spans` are the stretches over
which a replay may run without a break (method, §1).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from types import MappingProxyType

import numpy as np
import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.findings.base import Finding

CAUSES: tuple[str, ...] = ("", "gap", "manual", "excluded", "bad value", "out of range")
"""Why a sample may not be used, by the code in `Record.cause`; code 0 means that it may."""


@dataclass(frozen=True, slots=True)
class Span:
    """Samples start…stop−1 without a break."""

    start: int
    stop: int

    def __len__(self) -> int:
        return self.stop - self.start


@dataclass(frozen=True, slots=True, kw_only=True)
class InputFile:
    """One file the record came from, with its size and SHA-256."""

    path: str
    bytes: int
    sha256: str


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Record:
    """An evenly sampled log.

    Attributes
    ----------
    period : float
        Base period h [s].
    start : int
        Time of sample 0 [ns since 1970 UTC].
    y, r, u : ndarray, shape (N,)
        Measurement, setpoint [measurement unit] and actuator [actuator unit]; held through bridged holes,
        NaN outside the spans where nothing was recorded.
    w : ndarray, shape (n_w, N)
        Measured disturbances, in the order of the loop file.
    valid : ndarray of bool, shape (N,)
        True where y, r and u were recorded and may be used.
    spans : tuple of Span
        Stretches a replay may run over.
    y_quantum, u_quantum, r_quantum : float or None
        Step with which the signal is stored, None when it is not visibly quantised.
    y_deadband : float or None
        Dead-band of the archive for y, None when every value was stored.
    log_step : float
        Typical spacing of the log's own rows [s].
    low, high, max_rate : float
        Actuator limits and slew limit [unit, unit, unit/s]; infinite when there are none.
    findings : tuple of Finding
    lost_hours : mapping of str to float
        Hours that cannot be used, by cause.
    rows : int
        Rows read from the log.
    inputs : tuple of InputFile
    zone : str
        IANA name (or "UTC") of the log's own clock.
    cause : ndarray of int8, shape (N,), or None
        Index into `CAUSES` of what makes a sample unusable; None where nobody recorded it.
    """

    period: float
    start: int
    y: FloatArray
    r: FloatArray
    u: FloatArray
    w: FloatArray
    valid: BoolArray
    spans: tuple[Span, ...]
    y_quantum: float | None = None
    u_quantum: float | None = None
    r_quantum: float | None = None
    y_deadband: float | None = None
    log_step: float = 0.0
    low: float = -np.inf
    high: float = np.inf
    max_rate: float = np.inf
    findings: tuple[Finding, ...] = ()
    lost_hours: Mapping[str, float] = field(default_factory=lambda: MappingProxyType({}))
    rows: int = 0
    inputs: tuple[InputFile, ...] = ()
    zone: str = "UTC"
    cause: npt.NDArray[np.int8] | None = None

    def __len__(self) -> int:
        return len(self.y)

    @property
    def e(self) -> FloatArray:
        """Error r − y, shape (N,) [measurement unit]."""
        return np.asarray(self.r - self.y)

    @property
    def in_span(self) -> BoolArray:
        """True inside a span, shape (N,)."""
        inside = np.zeros(len(self), dtype=np.bool_)
        for span in self.spans:
            inside[span.start : span.stop] = True
        return inside

    @property
    def error_deviation(self) -> float:
        """Standard deviation of the error inside the spans [measurement unit]."""
        inside = self.in_span
        return float(np.std(self.e[inside])) if inside.any() else 0.0

    def time_ns(self, k: int | IntArray) -> IntArray:
        """Time of sample(s) `k` [ns since 1970 UTC]."""
        return np.asarray(self.start + np.rint(np.asarray(k) * (self.period * 1e9)).astype(np.int64))

    def with_findings(self, *more: Finding) -> Record:
        """Return the record with further findings."""
        return replace(self, findings=self.findings + more)
