"""`Finding`: one thing seen in a log, as data."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """One thing seen in the log; it never changes data by itself, `effect` says what was done about it.

    Attributes
    ----------
    kind : str
        Short name, one per check (`gap`, `duplicate`, …).
    start, end : int or None
        First and last time concerned [ns since 1970 UTC]; None when it concerns the whole log.
    count : int
        Rows, samples or occurrences.
    detail : str
        What was seen, in numbers.
    effect : str
        What was dropped, held, cut, or "none".
    signal : str
        Column or role concerned, empty when it is the clock.
    weight : str
        "note", "limits the answer" or "stops the answer".
    """

    kind: str
    start: int | None
    end: int | None
    count: int
    detail: str
    effect: str
    signal: str = ""
    weight: str = "note"
