"""Readable face of the closed-loop replay: settings, lanes, measures, and what a replay answers."""

from auditor.replay.types import Measures, Replay, Series, Setting

__all__ = ["Measures", "Replay", "Series", "Setting"]
