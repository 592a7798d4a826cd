"""`auditor audit`: the whole job."""

from __future__ import annotations

import shlex
import sys
from pathlib import Path
from typing import TYPE_CHECKING

import typer

from auditor.cli.options import CANNOT_ANSWER, JOBS, Jobs, Json, LoopFile, ModelFile, Out, Quick, Seed

if TYPE_CHECKING:
    from auditor.audit import Audit


def register(app: typer.Typer) -> None:
    """Add the command."""

    @app.command("audit", help="The whole job: read, identify, replay, compare, look for danger, decide, report.")
    def command(
        loopfile: LoopFile,
        out: Out = None,
        jobs: Jobs = JOBS,
        seed: Seed = 1,
        quick: Quick = False,
        json: Json = False,
        model: ModelFile = None,
    ) -> int:
        return run_audit(loopfile, out, jobs=jobs, seed=seed, quick=quick, json=json, model=model)


def run_audit(
    loopfile: Path, out: Path | None, *, jobs: int, seed: int, quick: bool, json: bool, model: Path | None
) -> int:
    """Audit one loop file, write the results, print the decision, and return the exit code."""
    from auditor.audit import audit
    from auditor.cli.screen import progress_on_stderr
    from auditor.identify.model_file import model_text, read_model
    from auditor.loopfile import read_loop
    from auditor.report.write import write_audit

    loop = read_loop(loopfile)
    folder = out if out is not None else Path(f"audit-{safe_name(loop.name)}")
    given = read_model(model) if model is not None else None
    with progress_on_stderr(quiet=json) as progress:
        result = audit(loop, model=given, seed=seed, quick=quick, jobs=jobs, command=_command_line(), progress=progress)
        written = write_audit(result, folder, model_text, progress)
    _say(result, folder, written, json)
    return 0 if result.answerable else CANNOT_ANSWER


def _say(result: Audit, folder: Path, written: list[Path], json: bool) -> None:
    from auditor.cli.summary import decision
    from auditor.report.as_json import audit_json

    if json:
        sys.stdout.write(audit_json(result))
        return
    print(decision(result))
    print(f"\nreport: {folder / 'report.html'}   ({len(written)} files in {folder})")


def _command_line() -> str:
    return shlex.join(["auditor", *sys.argv[1:]])


def safe_name(name: str) -> str:
    """A loop's name as a folder name."""
    return "".join(c if c.isalnum() or c in "-_." else "-" for c in name).strip("-.") or "loop"
