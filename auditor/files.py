"""Writing a file all at once: under a temporary name in the same folder, then renamed."""

from __future__ import annotations

import os
import tempfile
from pathlib import Path

from auditor.errors import OutputError, Problem


def write_text(path: Path, text: str, *, replace: bool = True) -> None:
    """Write UTF-8 text; see `write_bytes`."""
    write_bytes(path, text.encode("utf-8"), replace=replace)


def write_bytes(path: Path, body: bytes, *, replace: bool = True) -> None:
    """Write a file so that nobody ever sees half of it.

    Raises
    ------
    OutputError
        The file exists and `replace` is False, or the folder cannot be written.
    """
    if path.exists() and not replace:
        raise OutputError(
            Problem(what="the file is already there", where=str(path), do="give another name with --out, or remove it")
        )
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
        with os.fdopen(handle, "wb") as out:
            out.write(body)
        os.chmod(name, 0o644)
        os.replace(name, path)
    except OSError as error:
        raise OutputError(
            Problem(
                what="the result cannot be written",
                where=str(path),
                found=str(error),
                do="choose another place with --out",
            )
        ) from error
