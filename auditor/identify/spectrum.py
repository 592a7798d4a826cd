"""Record → periodograms of y and u, pooled over spans and averaged in bins of frequency.

The time unit is one base period, w a frequency in radians per base period. Every span that is long enough gives its
own tapered periodogram (5 % cosine taper at each end); the ordinates of all spans are pooled, so that a log cut by
holes still counts in full. u is divided by the controller's gain, see `auditor.identify.family`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from auditor.arrays import BoolArray, ComplexArray, FloatArray, IntArray, read_only
from auditor.controllers.pid import Pid
from auditor.errors import CannotAnswerError, Problem
from auditor.identify.loop_math import controller_spectrum
from auditor.kernels.spectral import Bins
from auditor.logs.record import Record, Span

SHORTEST_SPAN = 512  # samples; a shorter span has too few ordinates above its own leakage
_TAPERED = 0.05
_HIGHEST = 2.5  # [rad / base period]; above it the sampled controller and jitter of the log dominate
_LOWEST_OF_CONTROLLER = 0.3  # times 1/Ti
_LOWEST_CEILING = 0.03
_LOWEST_PERIODS = 4  # whole periods of the lowest frequency in a span
_RATIO, _STEP = 1.015, 0.012  # widths of the bins
_MARGIN = 8  # ordinates left out at the top of a spectrum that ends below the highest frequency
_SHAPE_LOW, _SHAPE_HIGH = 12, (2.8, 3.1)  # extra frequencies that only show the loop's shape
_POWERS = 7  # of q, for the plant's polynomials


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Spectrum:
    """Pooled ordinates of a record in order of frequency, and where the bins begin.

    Attributes
    ----------
    w : ndarray, shape (M,)
        Frequencies [rad / base period].
    y, u : ndarray of complex, shape (M,)
        Transforms of measurement and actuator over K, scaled so that white noise of variance s² has E|·|² = s².
    weight : ndarray, shape (M,)
        Effective ordinates per ordinate: below 1, for the taper correlates neighbours.
    span : ndarray of int, shape (M,)
        Span an ordinate comes from.
    edges : ndarray of int, shape (K + 1,)
        Bin i holds ordinates edges[i]…edges[i + 1] − 1.
    closed : float
        Share of time in which the loop was closed.
    controller : Pid
    period : float
        Base period [s].
    """

    w: FloatArray
    y: ComplexArray
    u: ComplexArray
    weight: FloatArray
    span: IntArray
    edges: IntArray
    closed: float
    controller: Pid
    period: float

    @property
    def lowest_frequency(self) -> float:
        """Lowest frequency that is compared with the record [rad / base period]."""
        return float(self.w[self.edges[0]])


def spectrum(record: Record, controller: Pid) -> Spectrum:
    """Return the spectrum of a record.

    Raises
    ------
    CannotAnswerError
        When no span has `SHORTEST_SPAN` samples, when y or u stands still in all of them, or when the controller
        has no gain.
    """
    spans = usable_spans(record)
    problems = _problems(record, spans, controller)
    if problems:
        raise CannotAnswerError(*problems)
    parts = [_ordinates(record, span, controller) for span in spans]
    w, y, u, weight = (np.concatenate(columns) for columns in zip(*parts, strict=True))
    span = np.repeat(np.arange(len(parts)), [len(part[0]) for part in parts])
    order = np.argsort(w, kind="stable")
    w = w[order]
    return Spectrum(
        w=read_only(w),
        y=read_only(y[order]),
        u=read_only(u[order]),
        weight=read_only(weight[order]),
        span=read_only(span[order]),
        edges=read_only(_edges(w)),
        closed=closed_share(record, spans),
        controller=controller,
        period=record.period,
    )


def usable_spans(record: Record) -> tuple[Span, ...]:
    """Return the spans of at least `SHORTEST_SPAN` samples."""
    return tuple(span for span in record.spans if len(span) >= SHORTEST_SPAN)


def closed_share(record: Record, spans: tuple[Span, ...]) -> float:
    """Return the share of samples with the actuator off its limits; at a limit the loop is open."""
    u = np.concatenate([record.u[span.start : span.stop] for span in spans])
    slack = 0.5 * record.u_quantum if record.u_quantum else 1e-9 * float(np.ptp(u))
    return float(np.mean((u > record.low + slack) & (u < record.high - slack)))


def _problems(record: Record, spans: tuple[Span, ...], controller: Pid) -> list[Problem]:
    problems = []
    if controller.gain == 0.0 or not np.isfinite(controller.gain):
        problems.append(
            Problem(
                what="The loop cannot be identified around a controller without proportional gain.",
                found=f"gain = {controller.gain:g}",
                do="State the controller's gain in the loop file.",
            )
        )
    if not spans:
        longest = max((len(span) for span in record.spans), default=0)
        problems.append(
            Problem(
                what="No stretch of the log is long enough to identify the loop.",
                found=f"longest stretch without a break: {longest} samples",
                expected=f"at least {SHORTEST_SPAN} samples",
                do="Give a longer log, or one with fewer holes and manual periods.",
            )
        )
    for name, signal in (("measurement", record.y), ("actuator", record.u)):
        if spans and all(np.ptp(signal[span.start : span.stop]) == 0.0 for span in spans):
            problems.append(
                Problem(
                    what=f"The {name} stands still, so nothing can be learnt about the loop.",
                    do="Give a part of the log in which the loop was at work.",
                )
            )
    return problems


def _ordinates(
    record: Record, span: Span, controller: Pid
) -> tuple[FloatArray, ComplexArray, ComplexArray, FloatArray]:
    """Frequencies, transforms and weights of one span, from its own lowest frequency up."""
    N = len(span)
    taper = _taper(N)
    power = float(np.sum(taper**2))
    w = 2.0 * np.pi * np.arange(N // 2 + 1) / N
    first = int(np.searchsorted(w, _lowest(N, controller.integral_time / record.period)))
    y, u = (_transform(s[span.start : span.stop], taper) for s in (record.y, record.u / controller.gain))
    weight = np.full(len(w), power**2 / (N * float(np.sum(taper**4))))
    return w[first:], y[first:], u[first:], weight[first:]


def _taper(N: int) -> FloatArray:
    """Ones with a cosine rise over the first and last 5 %."""
    length = int(N * _TAPERED)
    rise = 0.5 - 0.5 * np.cos(np.pi * (np.arange(length) + 0.5) / length)
    return np.concatenate([rise, np.ones(N - 2 * length), rise[::-1]])


def _transform(signal: FloatArray, taper: FloatArray) -> ComplexArray:
    centred = np.fft.rfft((signal - signal.mean()) * taper)
    return np.asarray(centred / np.sqrt(np.sum(taper**2)))


def _lowest(N: int, integral_time: float) -> float:
    """Lowest frequency used of a span of N samples: what the controller attends to, and what the span resolves."""
    return max(min(_LOWEST_OF_CONTROLLER / integral_time, _LOWEST_CEILING), 2.0 * np.pi * _LOWEST_PERIODS / N)


def _edges(w: FloatArray) -> IntArray:
    """First ordinates of bins of growing width, at least two ordinates each."""
    edges = [0]
    while w[edges[-1]] < _HIGHEST and edges[-1] < len(w) - _MARGIN:
        start = w[edges[-1]]
        wide = int(np.searchsorted(w, min(start * _RATIO, start + _STEP)))
        edges.append(max(edges[-1] + 2, wide))
    return np.array([edge for edge in edges if edge < len(w)], dtype=np.int64)


def binned(spectrum: Spectrum, keep: BoolArray, longest_delay: int) -> Bins:
    """Return the bins of a spectrum over the ordinates in `keep`, with frequencies below and above that carry no data.

    Parameters
    ----------
    spectrum : Spectrum
    keep : ndarray of bool, shape (M,)
        Ordinates to average.
    longest_delay : int
        Largest whole delay of a plant [samples].
    """
    starts = spectrum.edges[:-1]
    weight = np.where(keep, spectrum.weight, 0.0)[: spectrum.edges[-1]]
    count = np.add.reduceat(weight, starts)

    def mean(values: FloatArray) -> FloatArray:
        total = np.add.reduceat(values[: spectrum.edges[-1]] * weight, starts)
        return np.asarray(total / np.where(count > 0.0, count, 1.0))

    cross = np.conj(spectrum.u) * spectrum.y
    rows = [mean(np.abs(spectrum.y) ** 2), mean(np.abs(spectrum.u) ** 2), mean(cross.real), mean(cross.imag), count]
    centre = np.add.reduceat(spectrum.w[: spectrum.edges[-1]], starts) / np.diff(spectrum.edges)
    below, above = _shape_frequencies(centre)
    measured = np.pad(np.stack(rows), ((0, 0), (len(below), len(above))))
    return tabulate(spectrum, np.concatenate([below, centre, above]), measured, longest_delay)


def _shape_frequencies(centre: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Frequencies outside the data at which the loop's peak and its encirclements are still looked at."""
    below = np.geomspace(min(2e-4, centre[0] / 20.0), 0.95 * centre[0], _SHAPE_LOW)
    return below, np.array([w for w in _SHAPE_HIGH if w > centre[-1]])


def tabulate(spectrum: Spectrum, w: FloatArray, measured: FloatArray, longest_delay: int) -> Bins:
    """Return `Bins` at frequencies `w`, shape (K,), with the rows of `measured`, shape (5, K)."""
    controller = spectrum.controller
    C = controller_spectrum(controller, spectrum.period, w) / controller.gain
    powers = np.arange(_POWERS)[:, None] * w
    delays = np.arange(1, longest_delay + 2)[:, None] * w
    return Bins(
        measured=read_only(measured),
        controller=read_only(np.stack([C.real, C.imag])),
        cosine=read_only(np.cos(powers)),
        sine=read_only(np.sin(powers)),
        delay_cosine=read_only(np.cos(delays)),
        delay_sine=read_only(np.sin(delays)),
        closed=spectrum.closed,
    )
