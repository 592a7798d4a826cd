"""`auditor check`: what was found in a log; nothing is replayed."""

from __future__ import annotations

import sys

import typer

from auditor.cli.options import Json, LoopFile


def register(app: typer.Typer) -> None:
    """Add the command."""

    @app.command("check", help="Read the log and print what was found in it; nothing is replayed.")
    def command(loopfile: LoopFile, json: Json = False) -> None:
        from auditor.cli.screen import paragraph, progress_on_stderr
        from auditor.cli.strip import time_strip
        from auditor.cli.summary import asked_of_log, findings_table, record_lines
        from auditor.logs.align import read_record
        from auditor.loopfile import controller_in_words, read_loop
        from auditor.panel import requested
        from auditor.report.as_json import log_json

        loop = read_loop(loopfile)
        requested(loop, loop.period)
        with progress_on_stderr(quiet=json) as progress:
            progress("reading the log", 0.0)
            record = read_record(loop)
            progress("reading the log", 1.0)
        if json:
            sys.stdout.write(log_json(record))
            return
        told = [record_lines(record, loop), time_strip(record), findings_table(record), asked_of_log(record, loop)]
        stated = controller_in_words(loopfile)
        print(*told, *([paragraph(stated)] if stated else []), sep="\n\n")
