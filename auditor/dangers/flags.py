"""From masks per likely plant to flags: merging, shares, severity (method, §6)."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from functools import reduce
from types import MappingProxyType

import numpy as np

from auditor.arrays import BoolArray
from auditor.dangers.base import LIKELY, SEEN, Case, Detector, Stretch
from auditor.dangers.interval import Flag, shared_intervals


def raise_flags(case: Case, replay: int, detector: Detector) -> tuple[Flag, ...]:
    """Return the flags of one detector on one replay, in order of time.

    Masks of all clauses are taken together; intervals closer than the settling time are one; an interval is dropped
    below `SEEN`, "watch" below `LIKELY` or where the detector allows no more, else "danger".
    """
    return tuple(_flag(case, replay, detector, stretch) for stretch in _stretches(case, detector.find(case)))


def _stretches(case: Case, parts: Mapping[str, BoolArray]) -> Iterator[Stretch]:
    """Yield the merged intervals of a detector's masks."""
    if not parts:
        return
    mask = reduce(np.bitwise_or, parts.values())
    for start, stop in shared_intervals(mask, case.settling, SEEN):
        inside = {name: part[start:stop] for name, part in parts.items()}
        yield Stretch(start=start, stop=stop, mask=mask[start:stop], parts=inside, period=case.period)


def _flag(case: Case, replay: int, detector: Detector, stretch: Stretch) -> Flag:
    """Weigh one stretch and let the detector describe it."""
    share = stretch.share
    danger = share >= LIKELY and detector.may_be_danger(case, stretch)
    evidence = detector.describe(case, stretch)
    values = {"share": share, "duration_s": stretch.duration_s, **evidence.values}
    return Flag(
        replay=replay,
        start=stretch.start,
        stop=stretch.stop,
        cause=detector.CAUSE,
        severity="danger" if danger else "watch",
        detail=evidence.detail,
        values=MappingProxyType(values),
    )
