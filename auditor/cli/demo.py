"""`auditor demo`: a bundled sample loop, written out and audited."""

from __future__ import annotations

import shutil
import tomllib
from pathlib import Path
from typing import Annotated

import typer

from auditor.cli.options import JOBS, Out
from auditor.errors import CommandError, Problem
from auditor.text import nearest


def register(app: typer.Typer) -> None:
    """Add the command."""

    @app.command("demo", help="Write a bundled sample loop (log and loop file) to a folder and audit it.")
    def command(
        name: Annotated[
            str | None, typer.Argument(metavar="[NAME]", help="A sample; lists them and runs the first when left out.")
        ] = None,
        out: Out = None,
    ) -> int:
        from auditor.cli.audit import run_audit

        known = samples()
        if name is None:
            print(listing(known))
            name = next(iter(known))
        folder = out if out is not None else Path(f"audit-{name}")
        loopfile = copy_sample(known, name, folder)
        print(f"auditing {loopfile}\n")
        return run_audit(loopfile, folder, jobs=JOBS, seed=1, quick=False, json=False, model=None)


def samples_folder() -> Path:
    """Folder of the bundled samples: inside the installed package, or beside it in a checkout."""
    package = Path(__file__).resolve().parent.parent
    inside = package / "sample_logs"
    return inside if inside.is_dir() else package.parent / "sample_logs"


def samples() -> dict[str, Path]:
    """Loop files of the bundled samples by name, the first one first."""
    files = sorted(samples_folder().glob("*.toml"), key=lambda path: (path.stem != "canal-pool", path.stem))
    return {path.stem: path for path in files}


def listing(known: dict[str, Path]) -> str:
    """Names and descriptions of the samples."""
    from auditor.cli.screen import table

    rows = [
        [name, str(tomllib.loads(path.read_text("utf-8"))["loop"].get("description", ""))]
        for name, path in known.items()
    ]
    return table(["sample", "what it is (invented data)"], rows) + "\n"


def copy_sample(known: dict[str, Path], name: str, folder: Path) -> Path:
    """Copy a sample's loop file and log to a folder.

    Raises
    ------
    CommandError
        There is no such sample, or the folder holds another loop file.
    """
    if name not in known:
        close = nearest(name, known)
        raise CommandError(
            Problem(
                what=f"there is no sample '{name}'",
                expected=", ".join(known),
                do=f"did you mean '{close}'?" if close else "`auditor demo` lists them",
            )
        )
    source = known[name]
    log = tomllib.loads(source.read_text("utf-8"))["log"]["path"]
    _refuse_others(folder, source.name)
    folder.mkdir(parents=True, exist_ok=True)
    for path in (source, source.parent / log):
        shutil.copyfile(path, folder / path.name)
    return folder / source.name


def _refuse_others(folder: Path, own: str) -> None:
    """Keep a sample out of a folder in which another loop lives: its log and its report would be written over."""
    others = sorted(path.name for path in folder.glob("*.toml") if path.name != own)
    if others:
        raise CommandError(
            Problem(
                what="the folder holds another loop's files",
                where=str(folder),
                found=", ".join(others[:5]),
                expected=f"a new folder, or one with {own} only",
                do="give another folder with --out",
            )
        )
