"""Options shared by several commands."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Annotated

import typer

from auditor.errors import CannotAnswerError

LoopFile = Annotated[
    Path, typer.Argument(metavar="LOOPFILE", help="Loop file (TOML) that describes the loop and its log.")
]
Out = Annotated[
    Path | None, typer.Option("--out", metavar="DIR", help="Folder for results; ./audit-<loop name> when left out.")
]
Json = Annotated[bool, typer.Option("--json", help="Print the result as JSON on stdout and nothing else.")]
Seed = Annotated[int, typer.Option("--seed", min=0, help="Same input and seed, same result; a --model brings its own.")]
Quick = Annotated[bool, typer.Option("--quick", help="Fewer draws and a coarser panel: a first look.")]
Jobs = Annotated[int, typer.Option("--jobs", min=1, help="Threads to use; the result does not depend on it.")]
ModelFile = Annotated[Path | None, typer.Option("--model", metavar="FILE", help="Model saved by `identify --save`.")]

JOBS = min(8, os.cpu_count() or 1)
CANNOT_ANSWER = CannotAnswerError.exit_code
