"""When to update: one rule per file, one line each in `RULES`."""

from __future__ import annotations

from auditor.errors import Problem, RuleError
from auditor.rules import (
    actuator_deadband,
    error_area,
    level_crossing,
    linear_prediction,
    model_prediction,
    periodic,
    send_on_area,
    send_on_delta,
)
from auditor.rules.base import Rule, SettingSpec
from auditor.text import nearest

RULES: dict[str, Rule] = {
    rule.name: rule
    for rule in (
        periodic.RULE,
        send_on_delta.RULE,
        level_crossing.RULE,
        send_on_area.RULE,
        error_area.RULE,
        linear_prediction.RULE,
        model_prediction.RULE,
        actuator_deadband.RULE,
    )
}


def get_rule(name: str) -> Rule:
    """Return a rule by name.

    Raises
    ------
    RuleError
        The name is unknown; the error lists the known ones and the nearest.
    """
    if name in RULES:
        return RULES[name]
    close = nearest(name, RULES)
    raise RuleError(
        Problem(
            what=f"there is no rule '{name}'",
            found=name,
            expected=", ".join(RULES),
            do=f"did you mean '{close}'?" if close else "`auditor rules` lists them",
        )
    )


__all__ = ["RULES", "Rule", "SettingSpec", "get_rule"]
