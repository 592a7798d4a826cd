"""`auditor identify`: controller, likely plants, and how far they may be trusted."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from auditor.cli.options import CANNOT_ANSWER, JOBS, Jobs, Json, LoopFile, Quick, Seed


def register(app: typer.Typer) -> None:
    """Add the command."""

    @app.command("identify", help="Fit controller and plant, print and plot the validation.")
    def command(
        loopfile: LoopFile,
        save: Annotated[
            Path | None, typer.Option("--save", metavar="FILE", help="Save the model for `replay` and `audit`.")
        ] = None,
        plot: Annotated[
            Path | None, typer.Option("--plot", metavar="FILE", help="Step response of the likely plants, PNG or SVG.")
        ] = None,
        jobs: Jobs = JOBS,
        seed: Seed = 1,
        quick: Quick = False,
        json: Json = False,
    ) -> int:
        from auditor.cli.screen import progress_on_stderr
        from auditor.cli.summary import model_lines
        from auditor.files import write_bytes, write_text
        from auditor.identify.identify import identify
        from auditor.identify.model_file import model_text
        from auditor.logs.align import read_record
        from auditor.loopfile import read_loop
        from auditor.report.figures.step_response import check_suffix, picture

        if plot is not None:
            check_suffix(plot.suffix)
        loop = read_loop(loopfile)
        with progress_on_stderr(quiet=json) as progress:
            progress("reading the log", 0.0)
            record = read_record(loop)
            model = identify(record, loop, seed=seed, quick=quick, workers=jobs, progress=progress)
        if save is not None:
            write_text(save, model_text(model))
        if plot is not None:
            write_bytes(plot, picture(model, loop.signals.measurement.unit, plot.suffix))
        sys.stdout.write(model_text(model) if json else model_lines(model, loop) + "\n")
        return CANNOT_ANSWER if model.trust == "none" else 0
