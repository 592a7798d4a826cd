"""Errors a caller can mend, one class per room, each knowing its exit code.

A finding, a skip or a refusal that belongs to the data is a value with a reason, not an exception.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """One thing that is wrong, in the five parts a reader needs to mend it.

    Parameters
    ----------
    what : str
        What is wrong.
    where : str
        File, line, row, column, key or time.
    found, expected : str
        What was there and what could have been used instead.
    do : str
        The next step for the reader.
    """

    what: str
    where: str = ""
    found: str = ""
    expected: str = ""
    do: str = ""

    def sentence(self) -> str:
        """The same in one paragraph, for reports."""
        parts = [self.what[:1].upper() + self.what[1:]]
        labelled = (("found: ", self.found), ("expected: ", self.expected), ("what to do: ", self.do))
        parts += [label + text for label, text in labelled if text]
        return "; ".join(part.rstrip(".") for part in parts) + "."

    def __str__(self) -> str:
        rows = [self.what]
        for label, text in (
            ("where", self.where),
            ("found", self.found),
            ("expected", self.expected),
            ("do", self.do),
        ):
            if text:
                rows.append(f"  {label + ':':<10}{text}")
        return "\n".join(rows)


class AuditorError(Exception):
    """Base of all errors of the program; carries every problem one stage found.

    Parameters
    ----------
    *problems : Problem or str
        At least one; a plain string becomes a problem with only `what` filled.
    """

    exit_code = 1

    def __init__(self, *problems: Problem | str) -> None:
        self.problems: tuple[Problem, ...] = tuple(p if isinstance(p, Problem) else Problem(what=p) for p in problems)
        super().__init__("\n".join(str(p) for p in self.problems))


class CommandError(AuditorError):
    """The command line asks for something that does not exist."""

    exit_code = 2


class LoopFileError(AuditorError):
    """The loop file cannot be used."""

    exit_code = 3


class LogError(AuditorError):
    """The log cannot be read as the loop file describes it."""

    exit_code = 3


class RuleError(AuditorError):
    """A rule or one of its settings is unknown or out of range."""

    exit_code = 3


class OutputError(AuditorError):
    """A result cannot be written where it was asked for."""

    exit_code = 3


class CannotAnswerError(AuditorError):
    """The log was read but does not carry enough to answer."""

    exit_code = 4


def raise_all(kind: type[AuditorError], problems: Sequence[Problem]) -> None:
    """Raise one error that carries every problem, or return when there is none."""
    if problems:
        raise kind(*problems)
