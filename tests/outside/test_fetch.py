"""The download of open data: what is checked, and what happens where no registry answers. Needs no registry itself."""

from __future__ import annotations

import hashlib
import io
import os
import tarfile
import zipfile
from pathlib import Path

import pytest

from tests.outside.fetch import Member, check, fetch, read_member

pytestmark = pytest.mark.outside

CONTENT = b"1 2 3\n"
MEMBER = Member("open-data", "1.0", "data/log.dat", hashlib.sha256(CONTENT).hexdigest())


@pytest.fixture
def nothing_answers(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setenv("AUDITOR_DATA_CACHE", str(tmp_path))
    monkeypatch.setenv("PIP_CONFIG_FILE", os.devnull)
    monkeypatch.setenv("PIP_NO_INDEX", "1")
    monkeypatch.delenv("PIP_FIND_LINKS", raising=False)
    monkeypatch.delenv("AUDITOR_DATA_REQUIRED", raising=False)


def test_a_file_is_read_out_of_a_wheel_and_out_of_a_source_archive(tmp_path: Path) -> None:
    wheel, source = tmp_path / "a.whl", tmp_path / "a.tar.gz"
    with zipfile.ZipFile(wheel, "w") as made:
        made.writestr("data/log.dat", CONTENT)
    with tarfile.open(source, "w:gz") as made:
        entry = tarfile.TarInfo("open-data-1.0/data/log.dat")
        entry.size = len(CONTENT)
        made.addfile(entry, io.BytesIO(CONTENT))
    assert read_member(wheel, MEMBER.path) == read_member(source, MEMBER.path) == CONTENT
    with pytest.raises(ValueError, match="0 files data/other"):
        read_member(wheel, "data/other.dat")


def test_other_content_than_agreed_on_is_an_error() -> None:
    check(CONTENT, MEMBER)
    with pytest.raises(ValueError, match="SHA-256"):
        check(CONTENT + b"4", MEMBER)


def test_a_cached_file_is_used_and_checked_again(nothing_answers: None, tmp_path: Path) -> None:
    place = tmp_path / "open-data-1.0" / "log.dat"
    place.parent.mkdir()
    place.write_bytes(CONTENT)
    assert fetch(MEMBER) == place
    place.write_bytes(b"spoilt")
    with pytest.raises(ValueError, match="SHA-256"):
        fetch(MEMBER)


def test_out_of_reach_skips_with_the_reason_or_fails_where_it_must_not(
    nothing_answers: None, monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    with pytest.raises(pytest.skip.Exception, match=r"open-data==1\.0 cannot be downloaded: .+"):
        fetch(MEMBER)
    monkeypatch.setenv("AUDITOR_DATA_REQUIRED", "1")
    with pytest.raises(pytest.fail.Exception, match="cannot be downloaded"):
        fetch(MEMBER)
    assert not any(tmp_path.rglob("*.dat"))
