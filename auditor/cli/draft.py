"""`auditor draft`: a commented loop file to start from."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

if TYPE_CHECKING:
    from auditor.draft import Draft


def register(app: typer.Typer) -> None:
    """Add the command."""

    @app.command("draft", help="Look at an unknown log and write a commented loop file to start from.")
    def command(
        log: Annotated[str, typer.Argument(metavar="LOG", help="CSV or Parquet file, a folder of them, or a glob.")],
        out: Annotated[
            Path | None,
            typer.Option("--out", metavar="FILE", help="Loop file to write; <log name>.toml when left out."),
        ] = None,
    ) -> None:
        from auditor.draft import draft
        from auditor.files import write_text

        target = (
            out if out is not None else Path(Path(log).name.split(".")[0].strip("*?[]") or "loop").with_suffix(".toml")
        )
        drafted = draft(log, folder=target.parent)
        write_text(target, drafted.text, replace=False)
        print(guesses(drafted))
        print(f"\nwritten: {target}\n{next_steps(drafted, target)}")


def guesses(drafted: Draft) -> str:
    """What was guessed, how surely, and why."""
    from auditor.cli.screen import table_with_notes

    rows = [[g.key, g.value, g.sure, g.reason] for g in drafted.guesses]
    return table_with_notes(["key", "guess", "how sure", "why"], rows)


def next_steps(drafted: Draft, target: Path) -> str:
    """What a person does next."""
    if drafted.fill_in:
        asked = ", ".join(drafted.fill_in)
        return f"next: fill in {asked} (marked FILL IN), state your limits, then `auditor check {target}`"
    return f"next: check each guess, state your limits, then `auditor check {target}` and `auditor audit {target}`"
