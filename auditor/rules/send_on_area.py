"""Send-on-area: the deviation from what was sent has added up."""

from __future__ import annotations

from typing import Any

from auditor.arrays import FloatArray, IntArray
from auditor.kernels import rows as R
from auditor.kernels.jit import rule
from auditor.rules.base import Rule, SettingSpec


@rule
def fires(
    now: FloatArray, sent: FloatArray, since: IntArray, memory: FloatArray, settings: FloatArray, out: Any
) -> None:
    """h Σ |e − e_s| since the last update > area; settings are (area, h)."""
    for lane in range(len(since)):
        before = memory[0, lane] if since[lane] > 1 else 0.0
        total = before + abs(now[R.WATCHED, lane] - sent[R.WATCHED, lane])
        total = total if since[lane] > 0 else 0.0
        memory[0, lane] = total
        out[lane] = 1 if settings[1, lane] * total > settings[0, lane] else 0


RULE = Rule(
    name="send-on-area",
    formula="h Σ |e − e_s| since the last update > area",
    source="Miskowicz, Sensors 7 (2007) 16, 10.3390/s7010016",
    wins="Catches small deviations that last, which send-on-delta leaves standing.",
    loses="Noise adds up too: the rate has a floor of about noise / area.",
    settings=(SettingSpec(name="area", unit="measurement·s", meaning="summed deviation that is sent"),),
    fires=fires,
    pack=lambda values, period: (values["area"], period),
    memory_rows=lambda values, period: 1,
)
