"""Writing an audit's files: all of them or none, each under a temporary name first."""

from __future__ import annotations

import errno
import os
import re
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path

from auditor.audit import Audit
from auditor.errors import OutputError, Problem
from auditor.identify.plant import Model
from auditor.progress import Progress, silent
from auditor.report.as_csv import flags_csv, replays_csv
from auditor.report.as_html import render
from auditor.report.as_json import audit_json
from auditor.report.content import Content, gather
from auditor.report.figures import FIGURES, draw_all, style
from auditor.report.series import series_parquet

ModelText = Callable[[Model], str]

_OWN = re.compile(rf"series/\d+\.parquet|figures/({'|'.join(FIGURES)})\.(png|svg)")


def write_audit(
    audit: Audit, out: Path, model_text: ModelText | None = None, progress: Progress = silent
) -> list[Path]:
    """Write the files of an audit to the folder `out`, which is made when it is missing.

    Parameters
    ----------
    audit : Audit
    out : Path
    model_text : callable or None
        Writes a model as the text of `model.json`; without it, or without a model, that file is left out.
    progress : callable
        Told how far the writing is.

    Returns
    -------
    list of Path
        `report.html`, `audit.json`, `model.json`, `replays.csv`, `flags.csv`, `figures/*.svg`, `figures/*.png`
        and `series/<n>.parquet`. Files of an earlier audit in `out` that this one does not write are removed.

    Raises
    ------
    OutputError
        The folder or a file in it cannot be written, or the disk is full; then no file of `out` has changed.
    """
    staged: list[tuple[Path, Path]] = []
    made: list[Path] = []
    try:
        for name, body in _files(audit, model_text, progress):
            staged.append(_stage(out / name, body, made))
        for temporary, final in staged:
            os.replace(temporary, final)
    except OSError as fault:
        _undo((temporary for temporary, _ in staged), made)
        raise OutputError(_problem(fault, out)) from fault
    except BaseException:
        _undo((temporary for temporary, _ in staged), made)
        raise
    _remove_stale(out, {final for _, final in staged})
    progress("writing", 1.0)
    return [final for _, final in staged]


def _files(audit: Audit, model_text: ModelText | None, progress: Progress) -> Iterator[tuple[str, bytes]]:
    """Names and bytes of all files, one at a time."""
    content = gather(audit)
    progress("writing", 0.0)
    figures = draw_all(content)
    drawn = {name: style.svg(figure) for name, figure in figures.items()}
    yield "report.html", _encoded(render(content, drawn))
    yield "audit.json", _encoded(audit_json(audit))
    if audit.model is not None and model_text is not None:
        yield "model.json", _encoded(model_text(audit.model))
    yield "replays.csv", _encoded(replays_csv(audit))
    yield "flags.csv", _encoded(flags_csv(audit))
    progress("writing", 0.4)
    for name, figure in figures.items():
        yield f"figures/{name}.svg", _encoded(drawn[name])
        yield f"figures/{name}.png", style.png(figure)
    progress("writing", 0.8)
    yield from _series(content)


def _series(content: Content) -> Iterator[tuple[str, bytes]]:
    for index in content.shown:
        series = content.audit.replays[index].series
        if series is not None:
            yield f"series/{index}.parquet", series_parquet(content.audit.record, series)


def _encoded(text: str) -> bytes:
    return text.encode("utf-8", "replace")


def _stage(final: Path, body: bytes, made: list[Path]) -> tuple[Path, Path]:
    """Write `body` beside `final` under a temporary name; folders that had to be made go to `made`."""
    missing = [folder for folder in (final.parent, *final.parent.parents) if not folder.exists()]
    for folder in reversed(missing):
        folder.mkdir()
        made.append(folder)
    temporary = final.with_name(f".{final.name}.{os.getpid()}.part")
    try:
        temporary.write_bytes(body)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise
    return temporary, final


def _undo(temporaries: Iterable[Path], made: Iterable[Path]) -> None:
    """Take back what was staged; a folder that has got other files meanwhile stays."""
    for temporary in temporaries:
        temporary.unlink(missing_ok=True)
    for folder in reversed(list(made)):
        try:
            folder.rmdir()
        except OSError:
            return


def _remove_stale(out: Path, written: set[Path]) -> None:
    """Remove files of an earlier audit that would now contradict this one."""
    for path in (*out.glob("series/*"), *out.glob("figures/*")):
        if path not in written and _OWN.fullmatch(path.relative_to(out).as_posix()):
            path.unlink(missing_ok=True)


def _problem(fault: OSError, out: Path) -> Problem:
    where = str(fault.filename or out)
    if fault.errno in (errno.ENOSPC, errno.EDQUOT):
        what, do = "the disk is full", "make room, or choose another folder with --out; nothing was written"
    elif fault.errno in (errno.EACCES, errno.EPERM, errno.EROFS):
        what = "the folder cannot be written to"
        do = "choose another folder with --out, or ask for the right to write there"
    elif fault.errno in (errno.ENOTDIR, errno.EEXIST):
        what, do = "there is a file where a folder is needed", "choose another folder with --out"
    else:
        what, do = "a result cannot be written", "choose another folder with --out"
    found = fault.strerror or str(fault)
    return Problem(what=what, where=where, found=found, expected="a folder that can be written to", do=do)
