"""A first look into an unknown log: its columns as text, from the first, the middle and the last part of the file."""

from __future__ import annotations

import glob
import gzip
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import pyarrow as pa
import pyarrow.csv
import pyarrow.parquet

from auditor.draft.dress import Dress, encoding_of, look_at
from auditor.errors import LogError, Problem
from auditor.logs.files import nearest_log

HEAD = 256 * 1024
PART = 5 * 1024 * 1024
PART_ROWS = 66_000

GZIP = b"\x1f\x8b"

_MAGIC = (
    (b"PK\x03\x04", "a ZIP archive or a spreadsheet", "save the sheet as CSV, or unpack the archive"),
    (b"\xd0\xcf\x11\xe0", "a spreadsheet of the old binary kind", "save the sheet as CSV"),
    (b"SQLite format 3", "a database", "export the loop's columns as CSV or Parquet"),
)


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Peek:
    """Parts of a log.

    Attributes
    ----------
    parts : tuple of pyarrow.Table
        One to three parts in the order of time, with the same columns in each.
    written : tuple of str
        The columns' names as the log writes them: some may be empty, or stand twice.
    units : tuple of str
        The units line, one per column; empty texts when there is none.
    dress : Dress or None
        None for Parquet.
    whole : bool
        True when the parts are all there is.
    """

    parts: tuple[pa.Table, ...]
    written: tuple[str, ...]
    units: tuple[str, ...]
    dress: Dress | None
    whole: bool

    @property
    def names(self) -> list[str]:
        """The columns' names here: those of the log, with one made up where it is missing or stands twice."""
        return list(self.parts[0].column_names)


def look(path: Path) -> Peek:
    """Read the first, the middle and the last part of a file, a folder or a glob.

    Raises
    ------
    LogError
        When there is no such file, it is empty, or it is neither a text table nor Parquet.
    """
    files = files_of(path)
    chosen = [files[n] for n in sorted({0, len(files) // 2, len(files) - 1})]
    if _first_bytes(chosen[0], 4) == b"PAR1":
        return _parquet(chosen, whole=len(chosen) == len(files))
    return _text(chosen, whole=len(chosen) == len(files))


def files_of(path: Path) -> list[Path]:
    """Return the files of a log, in the order of their names.

    Raises
    ------
    LogError
        When there is none.
    """
    if path.is_dir():
        found = sorted(p for p in path.rglob("*") if p.is_file() and p.suffix.lower() in (".parquet", ".csv", ".txt"))
    elif path.exists():
        found = [path]
    else:
        found = sorted(Path(name) for name in glob.glob(str(path)))
    if not found:
        close = nearest_log(path)
        do = f'did you mean "{close}"?' if close else "check the path"
        raise LogError(_refusal(path, "there is no such log", "nothing", do))
    return found


def _refusal(path: Path, what: str, found: str, do: str) -> Problem:
    return Problem(what=what, where=str(path), found=found, expected="a text table (CSV) or Parquet", do=do)


def _parquet(files: Sequence[Path], whole: bool) -> Peek:
    parts, complete = [], whole
    for n, path in enumerate(files):
        try:
            with pa.parquet.ParquetFile(path) as file:
                groups = file.num_row_groups
                ends = sorted({0, groups // 2, groups - 1}) if len(files) == 1 else [n * (groups - 1) // 2]
                parts += [file.read_row_group(group).slice(0, PART_ROWS) for group in ends if groups]
                complete &= groups == len(ends) and all(
                    file.metadata.row_group(group).num_rows <= PART_ROWS for group in ends
                )
        except pa.ArrowException as error:
            raise LogError(_refusal(path, "the Parquet file cannot be read", str(error), "export it again")) from None
    if not any(part.num_rows for part in parts):
        raise LogError(_refusal(files[0], "the log is empty", "no row", "export it again"))
    common = [name for name in parts[0].column_names if all(name in part.column_names for part in parts)]
    parts = [part.select(common) for part in parts]
    return Peek(parts=tuple(parts), written=tuple(common), units=("",) * len(common), dress=None, whole=complete)


def _text(files: Sequence[Path], whole: bool) -> Peek:
    head = _first_bytes(files[0], HEAD)
    _refuse_binary(files[0], head)
    encoding = encoding_of(head)
    dress = look_at(_decoded(head, encoding), encoding)
    if dress is None:
        found = head[:60].decode("cp1252", "replace")
        raise LogError(_refusal(files[0], "no table was found in the log", found, "export it as CSV with a header row"))
    written = dress.names or ("",) * _width(dress, head)
    names = _unique(written)
    chunks = list(_chunks(files, dress))
    try:
        parts = [part for text in chunks if (part := _table(text, dress, names)).num_rows]
    except pa.ArrowException as error:
        raise LogError(_refusal(files[0], "the log cannot be read as a table", str(error), "export it again")) from None
    if not parts:
        raise LogError(_refusal(files[0], "the log is empty", "no row", "export it again"))
    units = dress.units or ("",) * len(names)
    most = PART_ROWS * 3 // len(parts)
    complete = whole and len(files) == len(chunks) and all(part.num_rows <= most for part in parts)
    complete &= all(_is_short(path, 3 * PART // len(files)) for path in files)
    cut = tuple(part.slice(0, most) for part in parts)
    return Peek(parts=cut, written=written, units=units, dress=dress, whole=complete)


def _refuse_binary(path: Path, head: bytes) -> None:
    if not head.strip():
        raise LogError(_refusal(path, "the log is empty", "0 bytes", "export it again"))
    for magic, found, do in _MAGIC:
        if head.startswith(magic):
            raise LogError(_refusal(path, "the log is not a text table", found, do))


def _width(dress: Dress, head: bytes) -> int:
    rows = _decoded(head, dress.encoding).splitlines()[dress.body :]
    return rows[0].count(dress.delimiter) + 1 if rows else 1


def _decoded(data: bytes, encoding: str) -> str:
    text = data.decode(encoding, "replace").lstrip("\ufeff")
    return text.replace("\r\n", "\n").replace("\r", "\n")


def _first_bytes(path: Path, count: int) -> bytes:
    with gzip.open(path) if is_packed(path) else path.open("rb") as file:
        return bytes(file.read(count))


def _is_short(path: Path, most: int) -> bool:
    """Return True for a file of at most `most` bytes, once unpacked."""
    if is_packed(path):
        return len(_first_bytes(path, most + 1)) <= most
    return path.stat().st_size <= most


def is_packed(path: Path) -> bool:
    """Return True for a file packed with gzip."""
    with path.open("rb") as file:
        return file.read(2) == GZIP


def _chunks(files: Sequence[Path], dress: Dress) -> Iterator[str]:
    """Yield whole lines of the body: everything of a small file, else its beginning, middle and end."""
    if len(files) > 1 or is_packed(files[0]) or files[0].stat().st_size <= 3 * PART:
        for path in files:
            text = _decoded(_first_bytes(path, 3 * PART // len(files)), dress.encoding)
            yield _without_first_lines(text, dress.body)
        return
    size = files[0].stat().st_size
    with files[0].open("rb") as file:
        yield _without_first_lines(_decoded(file.read(PART), dress.encoding), dress.body).rpartition("\n")[0]
        for start in ((size - PART) // 2, size - PART):
            # Two-byte encodings: a part must begin at an even byte.
            file.seek(start - start % 2)
            yield _decoded(file.read(PART), _marked(dress.encoding, files[0])).partition("\n")[2].rpartition("\n")[0]


def _marked(encoding: str, path: Path) -> str:
    """Return the encoding for a part without the byte order mark."""
    if encoding != "utf-16":
        return encoding
    with path.open("rb") as file:
        return "utf-16-le" if file.read(2) == b"\xff\xfe" else "utf-16-be"


def _without_first_lines(text: str, lines: int) -> str:
    start = 0
    for _ in range(lines):
        start = text.find("\n", start) + 1
        if not start:
            return ""
    return text[start:]


def _unique(names: Sequence[str]) -> list[str]:
    """Give a nameless or repeated column a name of its own, so that the table can be held."""
    seen: dict[str, int] = {}
    found = []
    for n, name in enumerate(names):
        name = name or f"column {n + 1}"
        seen[name] = seen.get(name, 0) + 1
        found.append(name if seen[name] == 1 else f"{name} ({seen[name]})")
    return found


def _table(text: str, dress: Dress, names: Sequence[str]) -> pa.Table:
    if not text.strip():
        return pa.table({name: pa.array([], pa.string()) for name in names})
    return pyarrow.csv.read_csv(
        pa.BufferReader(text.encode("utf-8")),
        read_options=pyarrow.csv.ReadOptions(column_names=list(names)),
        parse_options=pyarrow.csv.ParseOptions(delimiter=dress.delimiter, invalid_row_handler=lambda _: "skip"),
        convert_options=pyarrow.csv.ConvertOptions(
            column_types={name: pa.string() for name in names}, strings_can_be_null=True, null_values=[""]
        ),
    )
