"""`auditor draft`: a commented loop file to start from."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer


def register(app: typer.Typer) -> None:
    """Add the command."""

    @app.command("draft", help="Look at an unknown log and write a commented loop file to start from.")
    def command(
        log: Annotated[Path, typer.Argument(metavar="LOG", help="CSV or Parquet file.")],
        out: Annotated[
            Path | None,
            typer.Option("--out", metavar="FILE", help="Loop file to write; <log name>.toml when left out."),
        ] = None,
    ) -> None:
        from auditor.draft import draft
        from auditor.files import write_text

        target = out if out is not None else Path(log.name.split(".")[0] + ".toml")
        drafted = draft(log, target.parent)
        write_text(target, drafted.text, replace=False)
        print(drafted.summary)
        print(f"\nwritten: {target}\nnext: open it, check each guess, state your limits, then `auditor check {target}`")
