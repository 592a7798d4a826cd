"""Recommendation, verdict and cautions."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Recommendation:
    """The setting that would be chosen, on the first part of the record alone.

    `replay` is an index into the audit's replays, None when nothing can be recommended.
    """

    replay: int | None
    reasons: tuple[str, ...]


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Verdict:
    """`decision` is "switch", "keep" or "undecided"; reasons carry their numbers."""

    decision: str
    reasons: tuple[str, ...]
    cautions: tuple[str, ...]
