"""Error area: the control error itself has added up since the last update."""

from __future__ import annotations

from typing import Any

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.kernels import rows as R
from auditor.kernels.jit import rule
from auditor.rules.base import Rule, SettingSpec


@rule
def fires(
    now: FloatArray, sent: FloatArray, since: IntArray, memory: FloatArray, settings: FloatArray, out: Any
) -> None:
    """h Σ |e| since the last update > area, or |e − e_s| > delta; settings are (area, h, delta)."""
    for lane in range(len(since)):
        before = memory[0, lane] if since[lane] > 1 else 0.0
        total = before + abs(now[R.ERROR, lane])
        total = total if since[lane] > 0 else 0.0
        memory[0, lane] = total
        moved = abs(now[R.WATCHED, lane] - sent[R.WATCHED, lane]) > settings[2, lane]
        out[lane] = 1 if (settings[1, lane] * total > settings[0, lane] or moved) else 0


RULE = Rule(
    name="error-area",
    formula="h Σ |e| since the last update > area, or |e − e_s| > delta",
    source="integral of the error itself; common practice, no source",
    wins="Keeps updating while the error stands, so integral action brings it back; long silences only near setpoint.",
    loses="A standing error that the actuator cannot remove (saturation) updates without end.",
    settings=(
        SettingSpec(name="area", unit="measurement·s", meaning="summed error that asks for an update"),
        SettingSpec(name="delta", unit="measurement", meaning="move that is sent at once", default=np.inf),
    ),
    fires=fires,
    pack=lambda values, period: (values["area"], period, values["delta"]),
    memory_rows=lambda values, period: 1,
    threshold="delta",
    links=("sensor",),
)
