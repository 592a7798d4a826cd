"""`Guess`: one thing the draft states, why, and how sure that is."""

from __future__ import annotations

from dataclasses import dataclass

SURE = "sure"
LIKELY = "likely"
CHECK = "please check"


@dataclass(frozen=True, slots=True, kw_only=True)
class Guess:
    """One guess.

    Attributes
    ----------
    key : str
        Key of the loop file, such as ``signals.actuator.column``.
    value : str
        The value as the file writes it; empty when a person must fill it in.
    reason : str
    sure : str
        `SURE`, `LIKELY` or `CHECK`.
    """

    key: str
    value: str
    reason: str
    sure: str

    @property
    def fill_in(self) -> bool:
        """True when a person must state the value."""
        return not self.value
