"""The slowed-down clock."""

from __future__ import annotations

from typing import Any

from auditor.arrays import FloatArray, IntArray
from auditor.kernels.jit import rule
from auditor.rules.base import Rule, SettingSpec


@rule
def fires(
    now: FloatArray, sent: FloatArray, since: IntArray, memory: FloatArray, settings: FloatArray, out: Any
) -> None:
    """m ≥ every; the first gap of a span is `phase` samples, so that every phase of the clock can be replayed."""
    for lane in range(len(since)):
        begun = 0.0 if since[lane] == 0 else memory[0, lane]
        due = settings[1, lane] if begun == 0.0 else settings[0, lane]
        fire = since[lane] >= due and since[lane] > 0
        memory[0, lane] = 1.0 if fire else begun
        out[lane] = 1 if fire else 0


RULE = Rule(
    name="periodic",
    formula="m ≥ every",
    source="—",
    wins="Always a fair choice: nothing to tune, a fixed load on the channel, silence means a fault.",
    loses="Spends updates while nothing happens and is late when something does.",
    settings=(
        SettingSpec(name="every", unit="samples", meaning="samples between updates", above=1, closed=True),
        SettingSpec(
            name="phase", unit="samples", meaning="first gap of a span, 0: `every`", default=0, above=0, closed=True
        ),
    ),
    fires=fires,
    pack=lambda values, period: (values["every"], values["phase"] or values["every"]),
    memory_rows=lambda values, period: 1,
)
