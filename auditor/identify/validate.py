"""What engineers expect to see of a model: its free run against the record, also on data it was not fitted to.

These figures do not see a model that fits well and replays badly (in pure regulation u answers the load, so even the
true plant's free run explains nothing); they are shown, and earn no trust by themselves.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from auditor.arrays import FloatArray
from auditor.controllers.pid import Pid
from auditor.errors import CannotAnswerError
from auditor.identify.ensemble import estimate
from auditor.identify.plant import Plant
from auditor.identify.spectrum import SHORTEST_SPAN
from auditor.kernels import free_run as kernel
from auditor.logs.record import Record, Span

FITTED_SHARE = 0.6
_MOVE = 2.0  # noise deviations
_TO_DEVIATION = 1.4826  # from the median absolute deviation of a normal


def free_run(plant: Plant, u: FloatArray) -> FloatArray:
    """Return what the plant alone answers to `u`, shape (N,), starting from rest at the mean of `u`."""
    y = np.empty(len(u))
    kernel.free_run(plant.A, plant.B0, plant.B1, plant.C, plant.delay, np.asarray(u - np.mean(u)), y)
    return y


def explained_percent(plant: Plant, record: Record) -> float | None:
    """Return 100·(1 − ‖y − ŷ‖ / ‖y − ȳ‖) of the free run over the record's spans.

    ŷ is driven by u alone; its offset is fitted in every span, for a plant knows deviations only. Negative when the
    plant's answer to u lies further from the record than the record's mean, as it does where u mostly answers a load.

    Parameters
    ----------
    plant : Plant
    record : Record

    Returns
    -------
    float or None
        None when y does not move or there is no span.
    """
    missed = total = 0.0
    for span in record.spans:
        y = record.y[span.start : span.stop]
        left = y - free_run(plant, record.u[span.start : span.stop])
        missed += float(np.sum((left - left.mean()) ** 2))
        total += float(np.sum((y - y.mean()) ** 2))
    return 100.0 * (1.0 - float(np.sqrt(missed / total))) if total > 0.0 else None


def held_out_percent(record: Record, controller: Pid, *, plant: str | None, seed: int = 1) -> float | None:
    """Return `explained_percent` on the last part of the record, of a plant fitted to the first 60 %.

    None when the first part is too short to be fitted or the last one holds less than `SHORTEST_SPAN` samples.
    """
    fitted, rest = split(record, FITTED_SHARE)
    if sum(len(span) for span in rest.spans) < SHORTEST_SPAN:
        return None
    try:
        ensemble = estimate(fitted, controller, plant=plant, seed=seed, quick=True)
    except CannotAnswerError:
        return None
    return explained_percent(ensemble.plants[ensemble.best], rest)


def split(record: Record, share: float) -> tuple[Record, Record]:
    """Return the record with only the first `share` of its time inside spans, and with only the rest."""
    left = round(share * sum(len(span) for span in record.spans))
    first, rest = [], []
    for span in record.spans:
        cut = span.start + min(max(left, 0), len(span))
        left -= len(span)
        first.append(Span(span.start, cut))
        rest.append(Span(cut, span.stop))
    return tuple(  # type: ignore[return-value]
        replace(record, spans=tuple(span for span in spans if len(span) > 0)) for spans in (first, rest)
    )


def setpoint_moves(record: Record, within: int = 20) -> int:
    """Return the number of setpoint moves that excite the loop.

    A move is a change of r by more than two noise deviations within `within` samples; a setpoint in constant motion
    counts as one move every twice that many samples. The noise deviation is that of e = r − y without its excursions
    (median absolute deviation).

    Parameters
    ----------
    record : Record
    within : int
        Samples; a slower change is followed by the loop without being excited.
    """
    errors = record.e[record.in_span]
    if not len(errors):
        return 0
    deviation = _TO_DEVIATION * float(np.median(np.abs(errors - np.median(errors)))) or float(np.std(errors))
    return sum(_moves(record.r[span.start : span.stop], _MOVE * deviation, within) for span in record.spans)


def _moves(r: FloatArray, size: float, within: int) -> int:
    if len(r) <= within:
        return 0
    large = np.abs(r[within:] - r[:-within]) > size
    ends = np.flatnonzero(np.diff(np.concatenate([[False], large, [False]])))
    # A change within the window is seen from at most twice its length.
    return int(np.sum(np.ceil((ends[1::2] - ends[::2]) / (2.0 * within))))
