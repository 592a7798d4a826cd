"""Loops whose truth is known, for tests, docs and the sample logs."""

from auditor.synthetic.loads import between, drift, fine_times, opened, pulses
from auditor.synthetic.simulation import (
    Decide,
    Simulation,
    clock,
    send_on_area,
    send_on_delta,
    simulate,
)
from auditor.synthetic.truth import Truth, chain, resonance

__all__ = [
    "Decide",
    "Simulation",
    "Truth",
    "between",
    "chain",
    "clock",
    "drift",
    "fine_times",
    "opened",
    "pulses",
    "resonance",
    "send_on_area",
    "send_on_delta",
    "simulate",
]
