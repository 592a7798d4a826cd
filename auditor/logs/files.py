"""Which files a log consists of, what each really is, and what they are known by.

A file is recognised by its content, not by its name: exports are renamed more often than they are converted.
"""

from __future__ import annotations

import glob
import hashlib
import zipfile
from collections.abc import Iterable
from pathlib import Path
from urllib.parse import urlparse
from urllib.request import url2pathname

from auditor.errors import LogError, Problem, raise_all
from auditor.logs.packed import UNREADABLE, ZIP, Member, Place, head, members
from auditor.logs.record import InputFile
from auditor.loop import LogSource
from auditor.text import nearest_file

PARQUET_SUFFIXES = (".parquet", ".pq", ".parq")
TEXT_SUFFIXES = tuple(name + packing for packing in ("", ".gz", ".zst") for name in (".csv", ".tsv", ".txt"))
ARCHIVE_SUFFIXES = (".zip",)

_AS_CSV = "open it in the program it came from and save the sheet as CSV (UTF-8), then give that file"
_QUERY = "write the query's result to CSV or Parquet, then give that file"
_STRANGERS: tuple[tuple[bytes, str, str], ...] = (
    (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "a spreadsheet in the old binary format (.xls)", _AS_CSV),
    (b"SQLite format 3\x00", "a SQLite database", _QUERY),
    (b"\x00\x01\x00\x00Standard", "a desktop database (.mdb, .accdb)", _QUERY),
    (b"\x89HDF\r\n\x1a\n", "an HDF5 file", "export the columns needed to CSV or Parquet"),
    (b"ARROW1", "an Arrow or Feather file", "write the same table as Parquet"),
    (b"PARE", "an encrypted Parquet file", "write it without encryption"),
    (b"MATLAB 5.0", "a MAT file", "export the columns needed to CSV"),
    (b"%PDF", "a PDF document", "export the numbers, not the printed page"),
    (b"7z\xbc\xaf\x27\x1c", "a packed archive", "unpack it and give the file inside"),
    (b"BZh", "a file packed with bzip2", "unpack it, or pack it with gzip"),
    (b"\xfd7zXZ\x00", "a file packed with xz", "unpack it, or pack it with gzip"),
)
_PAGES: tuple[tuple[bytes, str], ...] = (
    (b"<!doctype html", "a web page"),
    (b"<html", "a web page"),
    (b"<table", "a web page"),
    (b"<?xml", "an XML file"),
)


def resolve(source: LogSource) -> tuple[Path, ...]:
    """Find the files of a log: each entry is a file, a pattern, or a folder, relative to the loop file's folder.

    Patterns and folders give their files in the order of their names; a file named twice is read once.

    Raises
    ------
    LogError
        When an entry names nothing; carries one problem for each such entry.
    """
    found: dict[Path, None] = {}
    problems: list[Problem] = []
    for entry in source.paths:
        try:
            found.update(dict.fromkeys(_matches(entry, source.folder)))
        except LogError as error:
            problems += error.problems
    if not source.paths:
        problems.append(
            Problem(what="No log is named.", where="[log] path", do="give a file, a list, a pattern or a folder")
        )
    raise_all(LogError, problems)
    return tuple(found)


def _matches(entry: str, folder: Path) -> list[Path]:
    path = folder / _local(entry)
    if path.is_dir():
        return _in_folder(path, entry)
    if path.is_file():
        return [path]
    if any(sign in entry for sign in "*?["):
        return _in_pattern(path, entry)
    raise LogError(_missing(path, entry))


def _local(entry: str) -> str:
    url = urlparse(entry)
    if url.scheme == "file":
        return url2pathname(url.path)
    if "://" in entry:
        what = f"The log is at a {url.scheme} address, and only files within reach of this machine are read."
        raise LogError(Problem(what=what, where=entry, do="copy the files to a folder and give that as path"))
    return entry


def _in_folder(path: Path, entry: str) -> list[Path]:
    inside = [p for p in sorted(path.rglob("*")) if p.is_file() and not _hidden(p.relative_to(path))]
    for suffixes in (PARQUET_SUFFIXES, TEXT_SUFFIXES, ARCHIVE_SUFFIXES):
        chosen = [p for p in inside if p.name.lower().endswith(suffixes)]
        if chosen:
            return chosen
    some = ", ".join(p.name for p in inside[:5]) or "nothing"
    expected = f"files ending in {', '.join(PARQUET_SUFFIXES + TEXT_SUFFIXES + ARCHIVE_SUFFIXES)}"
    what = "The folder holds no log."
    raise LogError(Problem(what=what, where=entry, found=some, expected=expected, do="give the files by a pattern"))


def _hidden(path: Path) -> bool:
    """Tell whether a part of the path starts as the bookkeeping files of data stores do."""
    return any(part.startswith((".", "_")) for part in path.parts)


def _in_pattern(path: Path, entry: str) -> list[Path]:
    chosen = [Path(name) for name in sorted(glob.glob(str(path), recursive=True)) if Path(name).is_file()]
    if chosen:
        return chosen
    parent = path.parent
    names = sorted(p.name for p in parent.iterdir() if p.is_file()) if parent.is_dir() else []
    found = f"{len(names)} files in {parent.name or parent}: {', '.join(names[:5])}" if names else "no files there"
    raise LogError(Problem(what="The pattern matches no file.", where=entry, found=found, do="correct [log] path"))


def _missing(path: Path, entry: str) -> Problem:
    if not path.parent.is_dir():
        return Problem(
            what="The log does not exist, and neither does its folder.", where=entry, do="correct [log] path"
        )
    close = nearest_log(path)
    do = f'did you mean "{close}"?' if close else "correct [log] path; it starts from the loop file's folder"
    names = _logs_in(path.parent)
    found = f"logs in that folder: {', '.join(names[:8]) or 'none'}"
    expected = "a file, a folder or a pattern, from the loop file's folder"
    return Problem(what="The log does not exist.", where=entry, found=found, expected=expected, do=do)


def nearest_log(path: Path) -> str | None:
    """Return the log beside a path that does not exist whose name is close to its own; None when there is none."""
    names = _logs_in(path.parent) if path.parent.is_dir() else []
    return next((n for n in names if n.casefold() == path.name.casefold()), None) or nearest_file(path.name, names)


def _logs_in(folder: Path) -> list[str]:
    suffixes = PARQUET_SUFFIXES + TEXT_SUFFIXES + ARCHIVE_SUFFIXES
    return sorted(p.name for p in folder.iterdir() if p.name.lower().endswith(suffixes) and p.is_file())


def expand(path: Path, folder: Path) -> tuple[Place, ...]:
    """Return the logs in a zip archive, and any other file itself.

    Raises
    ------
    LogError
        When the archive is encrypted, or unpacks to more than 2 GB and to more than 200 times its size.
    """
    try:
        return members(path, label(path, folder), (PARQUET_SUFFIXES, TEXT_SUFFIXES)) or (path,)
    except OSError:
        return (path,)  # reading it will tell


def label(path: Place, folder: Path) -> str:
    """Name a file the way its loop file would: relative to the folder where it can be, with forward slashes."""
    if isinstance(path, Member):
        return f"{label(path.archive, folder)}/{path.name}"
    try:
        return path.resolve().relative_to(folder.resolve()).as_posix()
    except ValueError:
        return path.as_posix()


def describe_inputs(paths: Iterable[Path], folder: Path) -> tuple[InputFile, ...]:
    """Record name, size [bytes] and SHA-256 of every input."""
    return tuple(_describe(path, folder) for path in paths)


def _describe(path: Path, folder: Path) -> InputFile:
    with path.open("rb") as file:
        digest = hashlib.file_digest(file, "sha256").hexdigest()
    return InputFile(path=label(path, folder), bytes=path.stat().st_size, sha256=digest)


def kind(path: Place, name: str) -> str:
    """Tell "csv" from "parquet" by looking inside; `name` is what the file is called in errors.

    Raises
    ------
    LogError
        When the file cannot be opened, is empty, or is neither: a spreadsheet, a database, an archive, a binary file.
    """
    try:
        start = head(path, 4096)
    except UNREADABLE as error:
        what = "The log cannot be opened."
        raise LogError(Problem(what=what, where=name, found=str(error), do="check the file and its rights")) from None
    if start.startswith(b"PAR1"):
        return "parquet"
    _refuse(path, name, start)
    return "csv"


def _refuse(path: Place, name: str, start: bytes) -> None:
    if not start.strip(b" \t\r\n\xef\xbb\xbf"):
        what = "The log is empty."
        raise LogError(Problem(what=what, where=name, found=f"{len(start)} bytes", do="export it again"))
    stranger = _stranger(path, start)
    if stranger is None and path.name.lower().endswith(PARQUET_SUFFIXES):
        stranger = ("not a Parquet file, whatever its name says", "write it again, or give it the name of what it is")
    if stranger is None and _binary(start):
        stranger = ("a binary file of an unknown kind", "export the log as CSV or Parquet")
    if stranger is not None:
        what = f"The log is {stranger[0]}."
        raise LogError(Problem(what=what, where=name, expected="a text file (CSV) or a Parquet file", do=stranger[1]))


def _stranger(path: Place, start: bytes) -> tuple[str, str] | None:
    if start.startswith(ZIP):
        return _zipped(path)
    for page, what in _PAGES:
        if start.lstrip(b"\xef\xbb\xbf \r\n\t").lower().startswith(page):
            return what, "some programs name such a file .xls; " + _AS_CSV
    return next(((what, do) for magic, what, do in _STRANGERS if start.startswith(magic)), None)


def _zipped(path: Place) -> tuple[str, str]:
    if isinstance(path, Member):
        return "an archive or a spreadsheet inside a zip archive", "unpack it and give the files inside"
    try:
        with zipfile.ZipFile(path) as archive:
            names = archive.namelist()
            media = archive.read("mimetype") if "mimetype" in names else b""
    except (OSError, zipfile.BadZipFile):
        return "a damaged archive", "copy or export it again"
    if any(name.startswith("xl/") for name in names):
        return "a spreadsheet (.xlsx)", _AS_CSV
    if b"opendocument" in media:
        return "a spreadsheet (.ods)", _AS_CSV
    return f"a zip archive of {len(names)} files", "unpack it and give the files inside"


def _binary(start: bytes) -> bool:
    if wide_encoding(start) is not None:
        return False
    control = sum(byte < 32 and byte not in b"\t\n\r\x0b\x0c\x1b" for byte in start)
    return b"\x00" in start or control > len(start) // 20


def wide_encoding(start: bytes) -> str | None:
    """Name the two-byte encoding of a text, by its mark or by where its zero bytes are; None when it has none."""
    if start.startswith((b"\xff\xfe", b"\xfe\xff")):
        return "utf-16"
    half = max(1, len(start) // 2)
    even, odd = start[0::2].count(0) / half, start[1::2].count(0) / half
    # Latin letters and digits in two bytes: one of the two is zero, the other never.
    if odd > 0.7 and even == 0:
        return "utf-16-le"
    return "utf-16-be" if even > 0.7 and odd == 0 else None
