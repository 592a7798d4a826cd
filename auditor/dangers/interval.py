"""`Flag`: a stretch in which triggering would have been dangerous, with its evidence; and merging."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass


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
