"""The program's commands, and what an error looks like on a terminal."""

from __future__ import annotations

import os
import sys
import traceback
from collections.abc import Sequence

import typer

from auditor.cli import audit, check, demo, disguise, draft, identify, replay, rules
from auditor.errors import AuditorError

FAULT, WRONG_COMMAND, INTERRUPTED = 1, 2, 130

app = typer.Typer(
    name="auditor",
    help="Replays event-based update rules on the log of a periodic feedback loop: how many updates each would have "
    "used, at what error, and when that would have been dangerous.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)

for module in (demo, draft, check, identify, replay, audit, rules, disguise):
    module.register(app)


def run(arguments: Sequence[str]) -> int:
    """Run one command and return its exit code (0, 1, 2, 3 or 4; 130 when interrupted).

    Errors the user can mend are told in full and without a traceback; a fault of the program asks for a report.
    """
    try:
        result = typer.main.get_command(app).main(args=list(arguments), prog_name="auditor", standalone_mode=False)
    except AuditorError as error:
        print(error, file=sys.stderr)
        return error.exit_code
    except (typer.Abort, KeyboardInterrupt):
        return _interrupted()
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except Exception as error:
        return _wrong_command(error) if hasattr(error, "show") else _fault(error)
    return int(result or 0)


def _wrong_command(error: Exception) -> int:
    """Errors of the command line know how to show themselves, whichever version of the parser raised them."""
    error.show()  # type: ignore[attr-defined]
    return WRONG_COMMAND


def _interrupted() -> int:
    print("\ninterrupted; nothing half written was left behind", file=sys.stderr)
    return INTERRUPTED


def _fault(error: Exception) -> int:
    """Tell a fault of the program itself: where it happened, and what to send."""
    where = traceback.extract_tb(error.__traceback__)[-1]
    print(
        f"a fault in the program itself: {type(error).__name__}: {error}\n"
        f"  where:    {os.path.basename(where.filename)} line {where.lineno}, in {where.name}\n"
        "  do:       please report it with this message, the loop file and the first rows of the log\n"
        "            (set AUDITOR_TRACE=1 to see the whole trace)",
        file=sys.stderr,
    )
    if os.environ.get("AUDITOR_TRACE"):
        traceback.print_exception(error)
    return FAULT
