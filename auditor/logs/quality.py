"""Codes of quality: what each says about the value beside it.

A good value is used, an uncertain one too, and is told; a bad one is none. A stale one repeats what was last known
while nothing new came: it looks like a perfect event-triggered record, so it is never a sample.

Sources: OPC UA status words, the one-byte OPC quality, NAMUR NE 107 letters: open standards; read in vendors' manuals
that agree.
"""

from __future__ import annotations

import enum
import re
from collections.abc import Callable, Iterable, Sequence
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import IntArray
from auditor.errors import LogError, Problem
from auditor.logs.cells import plain_words
from auditor.loop import LogSource


class Grade(enum.IntEnum):
    """What a code says; from `STALE` on the value is not used."""

    GOOD = 0
    UNCERTAIN = 1
    STALE = 2
    BAD = 3


_WHOLE = re.compile(r"([+-]?\d+)(\.0*)?")
_HEXADECIMAL = re.compile(r"0x[0-9a-f]+")
_LETTERS = {"f": Grade.BAD, "c": Grade.BAD, "s": Grade.UNCERTAIN, "m": Grade.UNCERTAIN}
"""NAMUR NE 107: failure; function check (somebody works on it); out of specification; maintenance required."""

_STALE_WORDS = ("stale", "last known", "last usable", "lastknown", "lastusable", "last_known", "last_usable")
_WORDS = (("good", Grade.GOOD), ("ok", Grade.GOOD), ("uncertain", Grade.UNCERTAIN), ("bad", Grade.BAD))
_LAST_USABLE = (0x408F, 0x4090)
"""Upper halves of the two OPC UA status words for a last usable value: without communication, and no longer updated."""

_STALE_BYTES = (20, 68)
"""Last known (bad) and last usable (uncertain); the two lowest bits only tell a limit and are left out."""

_GOOD_BYTE = 192
_UNCERTAIN_BYTE = 64
_MOST_SHOWN = 8


def read_codes(column: pa.ChunkedArray) -> tuple[IntArray, tuple[str, ...]]:
    """Return, for every row, the place of its code among the codes met, and these as text ("" for an empty cell)."""
    coded = column if pa.types.is_dictionary(column.type) else pc.dictionary_encode(column)
    coded = coded.unify_dictionaries().combine_chunks()
    if isinstance(coded, pa.ChunkedArray):
        coded = coded.chunk(0)
    # One more place, for empty cells; a dictionary may hold texts that no row has, and one text in two dresses.
    met = plain_words(pa.chunked_array([coded.dictionary])).to_pylist()
    indices = np.asarray(pc.fill_null(coded.indices, len(met)).to_numpy(), dtype=np.int64)
    used = np.flatnonzero(np.bincount(indices, minlength=len(met) + 1))
    places: dict[str, int] = {}
    remap = np.zeros(len(met) + 1, dtype=np.int64)
    for index in used.tolist():
        remap[index] = places.setdefault(met[index] if index < len(met) else "", len(places))
    return remap[indices], tuple(places)


def grades(codes: Iterable[str], source: LogSource) -> dict[str, Grade]:
    """Say what each code of a log means.

    Parameters
    ----------
    codes : iterable of str
        All codes of the log: which standard they follow shows in all of them together.
    source : LogSource
        `good` and `stale` are taken as stated. Once good codes are stated, every other one that is not stale is bad.

    Raises
    ------
    LogError
        When codes are neither stated nor known.
    """
    known = sorted(set(codes))
    good, stale = {_plain(code) for code in source.good}, {_plain(code) for code in source.stale}
    found = {code: Grade.GOOD for code in known if _plain(code) in good}
    found |= {code: Grade.STALE for code in known if _plain(code) in stale}
    rest = [code for code in known if code not in found]
    if good:
        return found | dict.fromkeys(rest, Grade.BAD)
    numbers = {code: number for code in known if (number := _number(code)) is not None}
    grade = _standard(list(numbers.values()))
    if grade is not None:
        found = {code: grade(number) for code, number in numbers.items()} | found
    found |= {code: word for code in rest if code not in numbers and (word := _word(code)) is not None}
    unknown = [code for code in rest if code not in found and code]
    if unknown:
        raise LogError(_unknown(unknown))
    # An empty cell says nothing against the value: where letters only name faults it is the usual case.
    letters = all(code.casefold() in _LETTERS for code in known if code)
    return found | {code: Grade.GOOD if letters else Grade.UNCERTAIN for code in rest if not code}


def _plain(code: Any) -> str:
    """Write a stated or recorded code so that 192, "192", 192.0 and "0xC0" are the same."""
    number = _number(str(code))
    return str(code).strip().casefold() if number is None else str(number)


def _number(code: str) -> int | None:
    """Return a whole number, a status word with its sign bit read as a sign included; None for any other text."""
    text = code.strip().casefold()
    if _HEXADECIMAL.fullmatch(text):
        return int(text, 16)
    whole = _WHOLE.fullmatch(text)
    if whole is None:
        return None
    number = int(whole.group(1))
    return number + 2**32 if -(2**31) <= number < 0 else number


def _standard(numbers: Sequence[int]) -> Callable[[int], Grade] | None:
    """Tell by which standard numbers are codes; None when they follow none that can be told.

    Zero alone is good as a status word: as a byte it would be bad, and a log of bad values only is kept by nobody.
    """
    if not numbers or min(numbers) < 0 or max(numbers) >= 2**32:
        return None
    bytes_seen = any(number & 0xFF >= _GOOD_BYTE for number in numbers)
    if max(numbers) >= 2**16 or (max(numbers) > 255 and not bytes_seen) or set(numbers) == {0}:
        return _of_status_word
    # Without any good byte small numbers are somebody's own codes.
    return _of_byte if bytes_seen else None


def _of_status_word(number: int) -> Grade:
    """Grade a 32-bit status word by its two highest bits; the lower half does not change its meaning."""
    if number >> 16 in _LAST_USABLE:
        return Grade.STALE
    return (Grade.GOOD, Grade.UNCERTAIN, Grade.BAD, Grade.BAD)[number >> 30]


def _of_byte(number: int) -> Grade:
    """Grade a quality byte; what stands above it belongs to the vendor."""
    byte = number & 0xFF
    if byte & ~0b11 in _STALE_BYTES:
        return Grade.STALE
    return Grade.GOOD if byte >= _GOOD_BYTE else Grade.UNCERTAIN if byte >= _UNCERTAIN_BYTE else Grade.BAD


def _word(code: str) -> Grade | None:
    """Grade a word: good, bad, uncertain or stale, alone or at the beginning ("Bad, no communication")."""
    text = code.strip().casefold()
    if any(word in text for word in _STALE_WORDS):
        return Grade.STALE
    return _LETTERS.get(text) or next((grade for word, grade in _WORDS if text.startswith(word)), None)


def _unknown(codes: Sequence[str]) -> Problem:
    more = f" and {len(codes) - _MOST_SHOWN} more" if len(codes) > _MOST_SHOWN else ""
    return Problem(
        what="Nothing tells what these codes of quality mean.",
        where="[log] quality",
        found=", ".join(f'"{code}"' for code in codes[:_MOST_SHOWN]) + more,
        expected="OPC UA status words, one-byte OPC quality with some of 192 or more, NAMUR NE 107 letters, or the "
        "words good, bad, uncertain, stale",
        do="state good = [...] in [log], and stale = [...] for codes of values that were only repeated",
    )
