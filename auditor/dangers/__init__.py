"""Where a replay would have been dangerous: one detector per file, and the table of them."""

from __future__ import annotations

from typing import Final

from auditor.dangers import band, blind, burst, growth, limit, outside_model, rate, saturation, silence
from auditor.dangers.base import LIKELY, SEEN, Case, Detector
from auditor.dangers.flags import raise_flags
from auditor.dangers.interval import Flag, covered_samples

__all__ = ["DETECTORS", "LIKELY", "SEEN", "Case", "Detector", "Flag", "covered_samples", "find_flags"]

DETECTORS: Final[tuple[Detector, ...]] = (
    limit,
    band,
    silence,
    burst,
    saturation,
    rate,
    outside_model,
    growth,
    blind,
)
"""In the order in which reports list them."""


def find_flags(case: Case, replay: int) -> tuple[Flag, ...]:
    """Return everything that would have been dangerous in one replay, in order of time.

    Parameters
    ----------
    case : Case
        The replay over the likely plants, and the record it came from.
    replay : int
        Index of the replay in the audit.

    Returns
    -------
    tuple of Flag
        Sorted by start; flags of one cause do not overlap and are at least a settling time apart.
    """
    flags = [flag for detector in DETECTORS for flag in raise_flags(case, replay, detector)]
    return tuple(sorted(flags, key=lambda flag: flag.start))
