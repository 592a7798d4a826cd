"""`Rule`: when to update, as data plus one compiled function.

A rule's function is called once per sample for all lanes with ``fires(now, sent, since, memory, settings, out)``:

now, sent : (signals, lanes)
    The sample before the decision, and what was sent at the last update; rows in `auditor.kernels.rows`.
since : (lanes,)
    Samples since the last update; 0 at the first sample of a span (the rule then sets up its memory; the update
    is made whatever it says), 1 at the first sample after an update (sums restart).
memory : (rows, lanes)
    The rule's own state.
settings : (rows, lanes)
    What `Rule.pack` made of the settings.
out : (lanes,)
    1 where the rule asks for an update. Guards are applied outside.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from auditor.errors import Problem, RuleError
from auditor.text import nearest

Values = Mapping[str, float]


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class SettingSpec:
    """One setting of a rule.

    Attributes
    ----------
    name : str
        As in loop files; a duration ends in `_s`.
    unit : str
        "measurement", "measurement·s", "command", "s", "samples" or ""; what the rule watches on its link stands for
        "measurement".
    meaning : str
    default : float or None
        None: must be given.
    above : float
        Values must be larger than this (or equal, when `closed`).
    """

    name: str
    unit: str
    meaning: str
    default: float | None = None
    above: float = 0.0
    closed: bool = False


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Rule:
    """A trigger rule.

    Attributes
    ----------
    name, formula, source, wins, loses : str
        For people.
    settings : tuple of SettingSpec
    fires : compiled function
    pack : callable
        (values, period [s]) -> rows of the compiled function's `settings`.
    memory_rows : callable
        (values, period [s]) -> rows of memory.
    link : str
        Default link, "sensor" or "actuator".
    threshold : str or None
        The setting that a log's resolution bounds from below (method, §5.4).
    links : tuple of str
        Links the rule makes sense on.
    predicts : bool
        True when the device runs the model beside the plant.
    """

    name: str
    formula: str
    source: str
    wins: str
    loses: str
    settings: tuple[SettingSpec, ...]
    fires: Callable[..., Any]
    pack: Callable[[Values, float], tuple[float, ...]]
    memory_rows: Callable[[Values, float], int] = lambda values, period: 0
    link: str = "sensor"
    threshold: str | None = None
    links: tuple[str, ...] = ("sensor", "actuator")
    predicts: bool = False

    def complete(self, given: Values) -> dict[str, float]:
        """Return the settings with defaults filled in, in the rule's own order.

        Raises
        ------
        RuleError
            A setting is unknown, missing or out of range; all of them are told at once.
        """
        problems = [self._unknown(name) for name in given if name not in self.names]
        problems += [p for spec in self.settings if (p := _wrong(self.name, spec, given)) is not None]
        if problems:
            raise RuleError(*problems)
        filled = {spec.name: given.get(spec.name, spec.default) for spec in self.settings}
        return {name: float(value) for name, value in filled.items() if value is not None}

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the settings."""
        return tuple(spec.name for spec in self.settings)

    def _unknown(self, name: str) -> Problem:
        close = nearest(name, self.names)
        return Problem(
            what=f"rule '{self.name}' has no setting '{name}'",
            found=name,
            expected=", ".join((*self.names, "min_gap", "max_silence")),
            do=f"did you mean '{close}'?" if close else "",
        )


def _wrong(rule: str, spec: SettingSpec, given: Values) -> Problem | None:
    value = given.get(spec.name, spec.default)
    if value is None:
        return Problem(
            what=f"rule '{rule}' needs the setting '{spec.name}'",
            expected=f"{spec.meaning} [{spec.unit or '-'}]",
            do=f"give it, for example --set {spec.name}=…",
        )
    bound = "at least" if spec.closed else "above"
    if not (value >= spec.above if spec.closed else value > spec.above):
        return Problem(
            what=f"setting '{spec.name}' of rule '{rule}' is out of range",
            found=f"{value:g}",
            expected=f"{bound} {spec.above:g} [{spec.unit or '-'}]",
        )
    return None
