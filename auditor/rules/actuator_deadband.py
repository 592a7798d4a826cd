"""A dead-band on the command: the controller sees every sample, the command travels only when it has moved enough."""

from __future__ import annotations

from auditor.rules.base import Rule, SettingSpec
from auditor.rules.send_on_delta import fires

RULE = Rule(
    name="actuator-deadband",
    formula="|u_would − u| > delta",
    source="common practice, no source",
    wins="Saves actuator moves and messages to the actuator where the controller sits beside the sensor.",
    loses="Leaves the loop in a limit cycle as wide as the dead-band when the controller has integral action.",
    settings=(SettingSpec(name="delta", unit="command", meaning="smallest move of the command that is sent"),),
    fires=fires,
    pack=lambda values, period: (values["delta"],),
    link="actuator",
    links=("actuator",),
)
