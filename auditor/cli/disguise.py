"""`auditor disguise`: a copy of the log that may be shared; the key stays here."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from auditor.cli.options import JOBS, Jobs, LoopFile

if TYPE_CHECKING:
    from auditor.disguise import Disguised


def register(app: typer.Typer) -> None:
    """Add the command."""

    @app.command("disguise", help="Write a copy that may be shared: neutral names, shifted time, other scale.")
    def command(
        loopfile: LoopFile,
        out: Annotated[Path, typer.Option("--out", metavar="DIR", help="Folder for the copy.")],
        seed: Annotated[
            int | None, typer.Option("--seed", min=0, help="Draws the key; left out, nobody can draw it again.")
        ] = None,
        jobs: Jobs = JOBS,
    ) -> None:
        from auditor.cli.screen import progress_on_stderr
        from auditor.disguise import disguise, write_disguised
        from auditor.disguise.write import check_targets
        from auditor.loopfile import read_loop

        loop = read_loop(loopfile)
        check_targets(loopfile, out)
        with progress_on_stderr() as progress:
            copy = disguise(loop, seed=seed, jobs=jobs, progress=progress)
        page, log, key = write_disguised(copy, loopfile, out)
        print(told(copy, page, log, key))


def told(copy: Disguised, page: Path, log: Path, key: Path) -> str:
    """What was written where, and what the copy does and does not hide."""
    from auditor.cli.screen import bullets

    moved = (
        "The measurement is scaled and shifted."
        if copy.key.measurement_offset
        else "The measurement is scaled and not shifted: no shift of this log keeps every digit."
    )
    notes = [
        moved,
        "Shape, period, hour of day and all counts are those of the original. This is a disguise, not encryption: who "
        "knows the loop may recognise it.",
    ]
    if copy.panel:
        notes.append("The loop file names no rules: the copy names the standard panel's settings.")
    files = f"to share:  {page}\n           {log}\nkeep here: {key}   (undoes the disguise; do not share it)"
    return f"{files}\n\n{bullets(notes)}"
