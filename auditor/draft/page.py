"""The draft as text: a commented loop file."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Mapping, Sequence

from auditor.draft.columns import Column
from auditor.draft.guess import Guess
from auditor.draft.guesses import quoted
from auditor.text import FILL_IN

WIDTH = 100

_HEAD = """\
# Loop file drafted by looking at {log}{part}.
# Every guess stands below its reason and how sure it is: "sure", "likely" or "please check".
# {fill}
"""
_FILL = "Lines marked FILL IN wait for you: the file cannot be used before they are filled in."
_NO_FILL = "Nothing has to be filled in before it can be used; the limits are yours to state."
_TABLES = ("loop", "log", "signals.measurement", "signals.setpoint", "signals.actuator", "signals.mode")

_CONTROLLER = """\
# [controller]                 # left out: it is recovered from the log. State it where you know it:
# gain = 1.0                   # actuator units per measurement unit, u = gain * (setpoint - measurement)
# integral_time = "10min"
# derivative_time = "0s"
"""
_ACCEPT = """\
# [accept]                     # what the decision needs; these are the defaults
# min_saved_fraction = 0.3
# min_hours = 48

# [[rules]]                    # left out: the standard panel, with thresholds scaled from the log
# rule = "send-on-delta"
# link = "sensor"
# delta = [0.01, 0.02, 0.05]
"""


def page(log: str, whole: bool, guesses: Sequence[Guess], hints: Mapping[str, str], others: Sequence[Column]) -> str:
    """Write the loop file.

    Parameters
    ----------
    log : str
        The log's name.
    whole : bool
        False when only parts of the log were looked at.
    guesses : sequence of Guess
    hints : mapping of str to str
        What the record itself did, by key of `[limits]`.
    others : sequence of Column
        Columns without a role.
    """
    fill = _FILL if any(guess.fill_in for guess in guesses) else _NO_FILL
    head = _HEAD.format(log=_printable(log), part="" if whole else " (its beginning, middle and end)", fill=fill)
    tables = [_table(name, [g for g in guesses if g.key.rpartition(".")[0] == name]) for name in _TABLES]
    return "\n".join([head, *filter(None, [*tables, _disturbances(others), _CONTROLLER, _limits(hints), _ACCEPT])])


def _table(name: str, guesses: Sequence[Guess]) -> str:
    if not guesses:
        return ""
    return "".join([f"[{name}]\n", *(_lines(guess) for guess in guesses)])


def _lines(guess: Guess) -> str:
    comment = _wrapped(f"{guess.sure}: {guess.reason}")
    key = guess.key.rpartition(".")[2]
    return f'{comment}{key} = ""  {FILL_IN}\n' if guess.fill_in else f"{comment}{key} = {guess.value}\n"


def _wrapped(text: str) -> str:
    flat = _printable(" ".join(text.split()))
    return "".join(f"# {line}\n" for line in textwrap.wrap(flat, WIDTH - 2, break_long_words=False))


def _printable(text: str) -> str:
    """Replace control characters, which a TOML comment may not hold."""
    return "".join(sign if sign.isprintable() else "?" for sign in text)


def _disturbances(others: Sequence[Column]) -> str:
    if not others:
        return ""
    intro = _wrapped(
        "please check: these columns have no role. If one of them is measured and disturbs the process, without "
        "being moved by this loop, take away the # in front of its lines."
    )
    return intro + "".join(_disturbance(column) for column in others)


def _disturbance(column: Column) -> str:
    unit = f"# unit = {quoted(column.unit)}\n" if column.unit else ""
    return f"# [[signals.disturbances]]\n# column = {quoted(column.name)}\n{unit}"


def _limits(hints: Mapping[str, str]) -> str:
    rows: Iterable[tuple[str, str]] = (
        ("low", hints.get("low", "the process must not be below")),
        ("high", hints.get("high", "the process must not be above")),
        ("band", hints.get("band", "|error| up to this is acceptable")),
        ("max_silence", 'longest acceptable time without an update, such as "30min"'),
    )
    start = (
        "[limits]\n# Yours to state, never guessed: without at least one limit and the band the verdict is undecided.\n"
    )
    return start + "".join(f"# {key} = {' ' * (12 - len(key))}# {hint}\n" for key, hint in rows)
