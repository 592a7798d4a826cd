"""`auditor replay`: one rule at one setting."""

from __future__ import annotations

import re
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from auditor.cli.options import CANNOT_ANSWER, JOBS, Json, LoopFile, ModelFile, Quick, Seed
from auditor.errors import CommandError, Problem

if TYPE_CHECKING:
    from auditor.replay import Replay


def register(app: typer.Typer) -> None:
    """Add the command."""

    @app.command("replay", help="Replay one rule at one setting.")
    def command(
        loopfile: LoopFile,
        rule: Annotated[str, typer.Option("--rule", metavar="NAME", help="A rule of `auditor rules`.")],
        given: Annotated[
            list[str] | None, typer.Option("--set", metavar="KEY=VALUE", help="A setting of the rule; repeat for more.")
        ] = None,
        link: Annotated[
            str | None, typer.Option("--link", help="sensor or actuator; the rule's own when left out.")
        ] = None,
        series: Annotated[
            Path | None,
            typer.Option("--series", metavar="FILE", help="Write the replayed signals as .parquet or .csv."),
        ] = None,
        model: ModelFile = None,
        seed: Seed = 1,
        quick: Quick = False,
        json: Json = False,
    ) -> int:
        from auditor.cli.screen import progress_on_stderr
        from auditor.cli.summary import replay_lines
        from auditor.files import write_bytes
        from auditor.identify.identify import identify
        from auditor.identify.model_file import read_model
        from auditor.job import replay_setting
        from auditor.logs.align import read_record
        from auditor.loopfile import read_loop
        from auditor.panel import one_setting
        from auditor.report.as_json import replay_json
        from auditor.report.series import check_suffix, series_bytes

        values = parse(given or [])
        if series is not None:
            check_suffix(series.suffix)
        loop = read_loop(loopfile)
        setting = one_setting(rule, values, loop, link)
        with progress_on_stderr(quiet=json) as progress:
            progress("reading the log", 0.0)
            record = read_record(loop)
            known = (
                read_model(model)
                if model
                else identify(record, loop, seed=seed, quick=quick, workers=JOBS, progress=progress)
            )
            result, flags = replay_setting(record, known, loop, setting, jobs=JOBS, progress=progress)
        if series is not None and result.series is not None:
            write_bytes(series, series_bytes(record, result.series, series.suffix))
        if json:
            sys.stdout.write(replay_json(result, flags, record))
            return answered(result)
        print(replay_lines(result, loop))
        dangers = [f for f in flags if f.severity == "danger"]
        print(f"{'flags':<18}{len(flags)}, {len(dangers)} of them danger")
        for flag in dangers[:5]:
            print(f"  {flag.cause}: {flag.detail}")
        return answered(result)


def answered(result: Replay) -> int:
    """Exit code: 4 when the log cannot answer this setting."""
    return 0 if result.answerable else CANNOT_ANSWER


def parse(pairs: list[str]) -> dict[str, float]:
    """Read KEY=VALUE pairs; durations end in a unit and are kept in seconds under KEY_s.

    Raises
    ------
    CommandError
        A pair is not KEY=VALUE, or the value is neither a number nor a duration.
    """
    values: dict[str, float] = {}
    problems: list[Problem] = []
    for pair in pairs:
        name, _, text = pair.partition("=")
        try:
            key, value = _setting(name.strip(), text.strip())
            values[key] = value
        except ValueError:
            problems.append(
                Problem(
                    what="a setting cannot be read",
                    found=pair,
                    expected="KEY=VALUE, a number or a duration such as 15min",
                    do=_point_for_comma(text),
                )
            )
    if problems:
        raise CommandError(*problems)
    return values


def _point_for_comma(text: str) -> str:
    comma = re.fullmatch(r"\s*([-+]?\d+),(\d+\s*[A-Za-z]*)\s*", text)
    return f"use a point: {comma[1]}.{comma[2]}" if comma else ""


def _setting(name: str, text: str) -> tuple[str, float]:
    from auditor.loopfile.durations import seconds

    if not name or not text:
        raise ValueError(text)
    in_time = name in ("min_gap", "max_silence") or text[-1].isalpha()
    if not in_time:
        return name, float(text)
    return (name if name.endswith("_s") else f"{name}_s"), seconds(text)
