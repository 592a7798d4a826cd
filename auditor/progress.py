"""Progress as an optional observer: the library reports, a face (or nobody) shows."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeAlias

Progress: TypeAlias = Callable[[str, float], None]
"""Called with the name of the stage and the share of it that is done, 0…1."""


def silent(stage: str, done: float) -> None:
    """Observe nothing."""
