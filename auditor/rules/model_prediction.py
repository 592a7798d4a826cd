"""Model prediction: the measurement has left what the plant's model, run at both ends, expects."""

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
    """|y − ŷ| > delta."""
    for lane in range(len(since)):
        out[lane] = 1 if abs(now[R.MEASUREMENT, lane] - now[R.PREDICTED, lane]) > settings[0, lane] else 0


RULE = Rule(
    name="model-prediction",
    formula="|y − ŷ| > delta, ŷ the identified model run from the last update at both ends",
    source="Lunze & Lehmann 2010; Garcia & Antsaklis 2013",
    wins="Slow plants whose answer to the actuator is well known: the move that control itself causes is not sent.",
    loses="Needs the model on both devices; a wrong gain sends more, not less; loads that change often. The controller "
    "acts on the value last sent: what goes as predicted is left standing.",
    settings=(SettingSpec(name="delta", unit="measurement", meaning="distance from the prediction that is sent"),),
    fires=fires,
    pack=lambda values, period: (values["delta"],),
    threshold="delta",
    links=("sensor",),
    predicts=True,
)
