"""Files as they are and files that are packed, opened alike: gzip, Zstandard, and what lies in a zip archive.

What grows beyond measure while it is unpacked is no log but a trap, or damage, and reading stops there.
"""

from __future__ import annotations

import gzip
import io
import zipfile
import zlib
from dataclasses import dataclass
from pathlib import Path
from typing import IO, TYPE_CHECKING, TypeAlias, cast

import pyarrow as pa

from auditor.errors import LogError, Problem

if TYPE_CHECKING:
    from _typeshed import WriteableBuffer

GZIP = b"\x1f\x8b"
ZSTANDARD = b"\x28\xb5\x2f\xfd"
ZIP = b"PK\x03\x04"
UNREADABLE = (OSError, EOFError, zlib.error, zipfile.BadZipFile, NotImplementedError)

MOST_BYTES = 2_000_000_000
MOST_TIMES = 200
"""A log may unpack to either of these: to so many bytes, or to so many times its packed size."""

_BUFFER = 1024 * 1024
_ENCRYPTED = 0x1


@dataclass(frozen=True, slots=True)
class Member:
    """A file in a zip archive."""

    archive: Path
    name: str


Place: TypeAlias = Path | Member
"""Where a file is."""


def open_bytes(place: Place) -> IO[bytes]:
    """Open a file for reading, unpacked.

    Raises
    ------
    LogError
        While it is read: when it unpacks to more than 2 GB and to more than 200 times its packed size.
    """
    if isinstance(place, Member):
        archive = zipfile.ZipFile(place.archive)
        return _unpacked(archive.open(place.name), archive.getinfo(place.name).compress_size, place)
    start = _start(place)
    if start.startswith(GZIP):
        return _unpacked(cast("IO[bytes]", gzip.open(place, "rb")), place.stat().st_size, place)
    if start.startswith(ZSTANDARD):
        stream = pa.input_stream(str(place), compression="zstd")
        return _unpacked(cast("IO[bytes]", stream), place.stat().st_size, place)
    return place.open("rb")


def is_packed(place: Place) -> bool:
    """Tell whether a file has to be unpacked to be read."""
    return isinstance(place, Member) or _start(place).startswith((GZIP, ZSTANDARD))


def open_text(place: Place, encoding: str) -> IO[str]:
    """Open a text log for reading line by line; letters that do not decode are replaced."""
    return io.TextIOWrapper(open_bytes(place), encoding=encoding, errors="replace", newline=None)


def head(place: Place, size: int) -> bytes:
    """Return the first `size` bytes of a file, unpacked."""
    with open_bytes(place) as file:
        return file.read(size)


def stream(place: Place) -> pa.NativeFile:
    """Open a file for the table readers, unpacked."""
    return pa.PythonFile(open_bytes(place), mode="r") if is_packed(place) else pa.input_stream(str(place))


def members(archive: Path, name: str, kinds: tuple[tuple[str, ...], ...]) -> tuple[Member, ...]:
    """List the logs in a zip archive, by name: the files of the first of `kinds` (endings) it has, or its only file.

    Parameters
    ----------
    archive : Path
    name : str
        What the archive is called in errors.
    kinds : tuple of tuple of str

    Returns
    -------
    tuple of Member
        Empty when it is no archive, or holds no log.

    Raises
    ------
    LogError
        When they are encrypted, or unpack to more than 2 GB and to more than 200 times the archive's size.
    """
    if not _start(archive).startswith(ZIP):
        return ()
    try:
        with zipfile.ZipFile(archive) as file:
            inside = [item for item in file.infolist() if not (item.is_dir() or _no_log(item.filename))]
    except zipfile.BadZipFile:
        return ()
    chosen = next((found for ends in kinds if (found := _ending(inside, ends))), inside if len(inside) == 1 else [])
    if any(item.flag_bits & _ENCRYPTED for item in chosen):
        raise LogError(Problem(what="The archive is encrypted.", where=name, do="unpack it and give the files inside"))
    if _too_large(sum(item.file_size for item in chosen), archive.stat().st_size):
        raise LogError(_trap(name))
    return tuple(Member(archive, item.filename) for item in sorted(chosen, key=lambda item: item.filename))


def _ending(inside: list[zipfile.ZipInfo], ends: tuple[str, ...]) -> list[zipfile.ZipInfo]:
    return [item for item in inside if item.filename.lower().endswith(ends)]


def _no_log(name: str) -> bool:
    """Tell bookkeeping: of data stores, of the program that packed the archive, of a document in many files."""
    return name == "mimetype" or any(part.startswith((".", "_")) for part in name.split("/"))


def _start(path: Path) -> bytes:
    with path.open("rb") as file:
        return file.read(4)


def _too_large(size: int, packed: int) -> bool:
    return size > max(MOST_BYTES, MOST_TIMES * packed)


def _trap(name: str) -> Problem:
    return Problem(
        what=f"The packed log unpacks to more than {MOST_TIMES} times its size.",
        where=name,
        found=f"more than {MOST_BYTES / 1e9:g} GB",
        expected=f"at most {MOST_BYTES / 1e9:g} GB, or {MOST_TIMES} times the packed size",
        do="if it is a log indeed, unpack it and give the files inside; otherwise export it again",
    )


def _unpacked(inner: IO[bytes], packed: int, place: Place) -> IO[bytes]:
    return io.BufferedReader(_Bounded(inner, packed, place.name), _BUFFER)


class _Bounded(io.RawIOBase):
    """Reads on until the file has become too large."""

    def __init__(self, inner: IO[bytes], packed: int, name: str) -> None:
        self._inner, self._packed, self._name, self._size = inner, packed, name, 0

    def readable(self) -> bool:
        return True

    def readinto(self, buffer: WriteableBuffer) -> int:
        view = memoryview(buffer).cast("B")
        data = self._inner.read(len(view))
        view[: len(data)] = data
        self._size += len(data)
        if _too_large(self._size, self._packed):
            raise LogError(_trap(self._name))
        return len(data)

    def close(self) -> None:
        if not self.closed:
            self._inner.close()
        super().close()
