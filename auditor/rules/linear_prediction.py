"""Linear prediction: the watched signal has left the straight line announced at the last update."""

from __future__ import annotations

from typing import Any

from auditor.arrays import FloatArray, IntArray
from auditor.kernels import rows as R
from auditor.kernels.jit import rule
from auditor.rules.base import Rule, SettingSpec, Values

# memory rows before the ring of past values
_SLOPE, _NEXT, _RING = 0, 1, 2


@rule
def fires(
    now: FloatArray, sent: FloatArray, since: IntArray, memory: FloatArray, settings: FloatArray, out: Any
) -> None:
    """|e − (e_s + slope_s · m h)| > delta; slope_s is the mean slope over the window before the last update.

    Settings are (delta, window in samples). The slope is kept per sample, so h drops out.
    """
    for lane in range(len(since)):
        x = now[R.WATCHED, lane]
        window = int(settings[1, lane])
        if since[lane] == 0:
            for i in range(window + 1):
                memory[_RING + i, lane] = x
            memory[_NEXT, lane] = 0.0
            memory[_SLOPE, lane] = 0.0
        place = int(memory[_NEXT, lane])
        if since[lane] == 1:
            # `place` holds the value one window before the one that was sent.
            memory[_SLOPE, lane] = (sent[R.WATCHED, lane] - memory[_RING + place, lane]) / window
        line = sent[R.WATCHED, lane] + memory[_SLOPE, lane] * since[lane]
        out[lane] = 1 if (since[lane] > 0 and abs(x - line) > settings[0, lane]) else 0
        memory[_RING + place, lane] = x
        memory[_NEXT, lane] = (place + 1) % (window + 1)


def _samples(values: Values, period: float) -> int:
    return max(1, round(values["window_s"] / period))


RULE = Rule(
    name="linear-prediction",
    formula="|e − (e_s + slope_s · m h)| > delta, slope_s the mean slope over the window before the update",
    source="Suh, Sensors 7 (2007) 437",
    wins="Ramps and slow swings that go on as announced: nothing is sent while they do.",
    loses="The controller still acts on the value last sent, so a silent ramp is an error that grows; noise makes the "
    "slope wrong unless the window is long, and steps make it shoot past.",
    settings=(
        SettingSpec(name="delta", unit="measurement", meaning="distance from the announced line that is sent"),
        SettingSpec(name="window_s", unit="s", meaning="stretch over which the slope is taken"),
    ),
    fires=fires,
    pack=lambda values, period: (values["delta"], float(_samples(values, period))),
    memory_rows=lambda values, period: _RING + 1 + _samples(values, period),
    threshold="delta",
)
