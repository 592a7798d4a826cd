"""Send-on-delta: the watched signal has moved away from what was sent."""

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
    """|e − e_s| > delta."""
    for lane in range(len(since)):
        out[lane] = 1 if abs(now[R.WATCHED, lane] - sent[R.WATCHED, lane]) > settings[0, lane] else 0


RULE = Rule(
    name="send-on-delta",
    formula="|e − e_s| > delta",
    source="Åström & Bernhardsson 1999; Miskowicz, Sensors 6 (2006) 49",
    wins="Loads that come in steps or slow swings, noise well below delta, dead time short against the loop.",
    loses="Noise near delta (it updates at noise peaks), ramps, long dead time, oscillatory loops: it can fall into a "
    "cycle whose rate hardly falls while delta grows.",
    settings=(SettingSpec(name="delta", unit="measurement", meaning="smallest move that is sent"),),
    fires=fires,
    pack=lambda values, period: (values["delta"],),
    threshold="delta",
)
