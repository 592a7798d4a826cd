"""Level crossing: the watched signal has reached the next line of a fixed grid."""

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
    """|x − L| ≥ spacing + hysteresis; then L moves by whole spacings towards x. A span starts on the nearest line."""
    for lane in range(len(since)):
        x = now[R.WATCHED, lane]
        spacing, hysteresis, origin = settings[0, lane], settings[1, lane], settings[2, lane]
        nearest = origin + spacing * np.rint((x - origin) / spacing)
        line = nearest if since[lane] == 0 else memory[0, lane]
        fire = abs(x - line) >= spacing + hysteresis
        memory[0, lane] = line + spacing * np.trunc((x - line) / spacing) if fire else line
        out[lane] = 1 if fire else 0


RULE = Rule(
    name="level-crossing",
    formula="|x − L| ≥ spacing + hysteresis, L the last line crossed; then L moves by whole spacings towards x",
    source="Lebesgue sampling: Åström & Bernhardsson 1999, CDC 2002, 10.1109/CDC.2002.1184824",
    wins="Receivers need no memory of what was sent: a message means a known line was crossed.",
    loses="Noise on a line repeats messages unless hysteresis is wider than the noise.",
    settings=(
        SettingSpec(name="spacing", unit="measurement", meaning="distance between lines"),
        SettingSpec(
            name="hysteresis", unit="measurement", meaning="further travel asked for", default=0.0, closed=True
        ),
        SettingSpec(name="origin", unit="measurement", meaning="where one line lies", default=0.0, above=-np.inf),
    ),
    fires=fires,
    pack=lambda values, period: (values["spacing"], values["hysteresis"], values["origin"]),
    memory_rows=lambda values, period: 1,
    threshold="spacing",
)
