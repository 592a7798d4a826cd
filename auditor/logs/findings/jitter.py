"""Stamps that come early or late by a visible part of their spacing."""

from __future__ import annotations

import numpy as np

from auditor.logs.findings.base import Finding
from auditor.logs.findings.evidence import Evidence
from auditor.logs.findings.wording import plural
from auditor.text import duration, percent

_VISIBLE = 0.1
_SHARE = 0.002
_FEWEST = 5
_MUCH = 0.05


def find(seen: Evidence) -> list[Finding]:
    """Report stamps more than a tenth of their spacing off it, when they are more than a few or cost a row."""
    off = np.abs(seen.unevenness) > _VISIBLE
    count = int(off.sum())
    crowded = seen.crowded if count and seen.log_step >= seen.period else 0
    if count <= max(_FEWEST, _SHARE * len(off)) and not crowded:
        return []
    at = np.flatnonzero(off)
    share = count / len(off)
    return [
        Finding(
            kind="jitter",
            start=int(seen.beats[at[0]]),
            end=int(seen.beats[at[-1] + 1]),
            count=count,
            detail=f"{percent(share, 2)} of the rows come more than {percent(_VISIBLE)} of {duration(seen.unit)} early "
            f"or late, nine of ten of all rows within {duration(_usual(seen))}",
            effect=_effect(seen, crowded),
            weight="limits the answer" if share > _MUCH and not seen.regular else "note",
        )
    ]


def _usual(seen: Evidence) -> float:
    """Return what nine of ten rows are at most off their spacing [s]."""
    return float(np.quantile(np.abs(seen.unevenness), 0.9)) * seen.unit


def _effect(seen: Evidence, crowded: int) -> str:
    """Say how the stamps were brought to the grid."""
    if not seen.regular:
        text = "the rows follow no clock: the last value at or before each instant is used"
    else:
        text = f"stamps up to {duration(seen.tolerance)} behind an instant snapped to it, later ones count for the next"
    return text + (f"; {plural(crowded, 'row')} left out as a later one fell into the same period" if crowded else "")
