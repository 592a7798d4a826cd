"""Open data by name: downloaded from the package registry that carries it, checked by its SHA-256, kept in a cache.

The carrying package is never imported and nothing in it is unpickled: the one file is read out of the archive. Nothing
is kept in the repository. Where no registry can be reached the test that asked is skipped with the reason, or fails
where `AUDITOR_DATA_REQUIRED` is set, as it is on the server that must not skip.
"""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import tarfile
import tempfile
import zipfile
from dataclasses import dataclass
from pathlib import Path

import pytest

PATIENCE_S = 120
"""A registry that has not answered by then counts as out of reach."""


@dataclass(frozen=True, slots=True)
class Member:
    """One file of one version of a package; `source` when only the source archive carries it."""

    package: str
    version: str
    path: str
    sha256: str
    source: bool = False


def cache_folder() -> Path:
    """Where downloads are kept; `AUDITOR_DATA_CACHE` names another place."""
    stated = os.environ.get("AUDITOR_DATA_CACHE")
    return Path(stated) if stated else Path(__file__).parent / ".cache"


def fetch(member: Member) -> Path:
    """Return the file's place in the cache, after downloading it if it is not there.

    Raises
    ------
    ValueError
        The archive does not hold the file, or holds another one than was agreed on.
    """
    place = cache_folder() / f"{member.package}-{member.version}" / Path(member.path).name
    if not place.exists():
        content = read_member(_archive(member), member.path)
        check(content, member)
        _write(place, content)
    check(place.read_bytes(), member)
    return place


def check(content: bytes, member: Member) -> None:
    """See that the content is the one the tests were written for."""
    found = hashlib.sha256(content).hexdigest()
    if found != member.sha256:
        raise ValueError(f"{member.path} of {member.package} {member.version}: SHA-256 {found}, not {member.sha256}")


def read_member(archive: Path, path: str) -> bytes:
    """Read one file of a wheel, or of a source archive, whose paths begin with a folder of its own."""
    if archive.suffix in (".whl", ".zip"):
        with zipfile.ZipFile(archive) as opened:
            return opened.read(_only(opened.namelist(), path))
    with tarfile.open(archive) as opened:
        content = opened.extractfile(_only(opened.getnames(), path))
        if content is None:
            raise ValueError(f"{path} is no file of {archive.name}")
        return content.read()


def _only(names: list[str], path: str) -> str:
    matching = [name for name in names if name == path or name.endswith(f"/{path}")]
    if len(matching) != 1:
        raise ValueError(f"{len(matching)} files {path} in the archive, one expected")
    return matching[0]


def _archive(member: Member) -> Path:
    """Return the package's archive in the cache, downloaded by the registry's own client."""
    folder = cache_folder() / "archives" / f"{member.package}-{member.version}"
    kept = list(folder.glob("*")) if folder.exists() else []
    if kept:
        return kept[0]
    folder.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(dir=folder.parent) as temporary:
        _download(member, temporary)
        (archive,) = Path(temporary).iterdir()
        folder.mkdir(exist_ok=True)
        return archive.replace(folder / archive.name)


def _download(member: Member, folder: str) -> None:
    # Never "--no-binary=:all:": that would build build tools from source.
    kind = ["--no-binary", member.package] if member.source else ["--only-binary=:all:"]
    wanted = f"{member.package}=={member.version}"
    command = [sys.executable, "-m", "pip", "download", "--no-deps", *kind, "--dest", folder, wanted]
    try:
        done = subprocess.run(command, capture_output=True, text=True, timeout=PATIENCE_S, check=False)
    except subprocess.TimeoutExpired:
        _out_of_reach(wanted, f"no answer in {PATIENCE_S} s")
    else:
        if done.returncode != 0:
            _out_of_reach(wanted, (done.stderr.strip().splitlines() or ["no message"])[-1])


def _out_of_reach(wanted: str, why: str) -> None:
    told = f"{wanted} cannot be downloaded: {why}"
    if os.environ.get("AUDITOR_DATA_REQUIRED"):
        pytest.fail(told)
    pytest.skip(told)


def _write(place: Path, content: bytes) -> None:
    """Write whole or not at all; tests in other processes may want the same file."""
    place.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.NamedTemporaryFile(dir=place.parent, delete=False) as part:
        part.write(content)
    os.replace(part.name, place)
