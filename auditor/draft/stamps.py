"""From cells to times: which way of writing a time the cells of one column follow."""

from __future__ import annotations

import datetime
import functools
import itertools
import re
from collections import Counter
from collections.abc import Iterable, Mapping, Sequence

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from auditor.arrays import FloatArray, IntArray

NO_TIME = np.iinfo(np.int64).min
SAMPLES = 60
MOST = 0.8
_FIRST, _LAST = pd.Timestamp("1900-01-01", tz="UTC"), pd.Timestamp("2200-01-01", tz="UTC")

ISO = "ISO8601"
_ISO = re.compile(r"\d{4}-\d{2}-\d{2}[T ]\d{2}:\d{2}(?::\d{2}(?:[.,]\d+)?)?\s?(?:Z|[+-]\d{2}:?\d{2})?", re.IGNORECASE)
_OFFSET = re.compile(r"\d\s?(?:Z|[+-]\d{2}:?\d{2})$", re.IGNORECASE)
_COMPACT = re.compile(r"(?:19|20)\d{2}(?:0[1-9]|1[0-2])(?:[0-2]\d|3[01])\d{4}(?:\d{2})?")
_DATE_ONLY = re.compile(r"\d{1,4}[-./]\d{1,2}[-./]\d{1,4}")
_TIME_ONLY = re.compile(r"\d{1,2}:\d{2}(?::\d{2}(?:[.,]\d+)?)?")
_DATES = ("%d.%m.%Y", "%d/%m/%Y", "%m/%d/%Y", "%d-%m-%Y", "%m-%d-%Y", "%Y/%m/%d", "%Y.%m.%d", "%Y-%m-%d", "%Y%m%d",
          "%d.%m.%y", "%d/%m/%y", "%m/%d/%y", "%d-%m-%y", "%d-%b-%Y", "%d %b %Y", "%d-%b-%y", "%b %d %Y")  # fmt: skip
_TIMES = ("%H:%M:%S", "%H:%M", "%H:%M:%S.%f", "%H:%M:%S,%f", "%I:%M:%S %p", "%I:%M %p", "%H%M%S", "%H.%M.%S")
_BETWEEN = (" ", "T", ", ")
_ZONES = ("", " %z", "%z")

_EPOCH_UNITS = (("s", 1e8, 4.2e9), ("ms", 1e11, 4.2e12), ("us", 1e14, 4.2e15), ("ns", 1e17, 4.2e18))
UNIT_NS = {"s": 1_000_000_000, "ms": 1_000_000, "us": 1_000, "ns": 1}


def samples_of(cells: pa.ChunkedArray) -> list[str]:
    """Return some filled cells as text, spread over the column."""
    filled = pc.drop_null(cells)
    if not len(filled):
        return []
    step = max(1, len(filled) // SAMPLES)
    return [str(cell).strip() for cell in filled.take(pa.array(range(0, len(filled), step))).to_pylist()]


def formats_for(samples: Sequence[str]) -> list[str]:
    """Return every way of writing (``strptime``, or `ISO`) that most samples follow; a few may be spoiled."""
    if _most(_ISO.fullmatch(sample) is not None for sample in samples):
        return [ISO]
    if _most(_COMPACT.fullmatch(sample) is not None for sample in samples):
        return ["%Y%m%d%H%M%S" if len(samples[0]) == 14 else "%Y%m%d%H%M"]
    shapes = Counter(map(_shape, samples)).most_common(1)
    found = _ways_by_shape().get(shapes[0][0], ()) if shapes else ()
    return [way for way in found if _most(_follows(sample, way) for sample in samples)]


def _most(answers: Iterable[bool]) -> bool:
    given = list(answers)
    return sum(given) > MOST * len(given)


@functools.cache
def _ways_by_shape() -> Mapping[str, Sequence[str]]:
    """Every way of writing, by the shape of what it writes: trying all of them on every column would take seconds."""
    ways: dict[str, list[str]] = {}
    for date, between, clock, zone in itertools.product(_DATES, _BETWEEN, _TIMES, _ZONES):
        way = f"{date}{between}{clock}{zone}"
        for written in ("+0100", "-0100", "+01:00", "-01:00", "Z") if zone else ("",):
            example = datetime.datetime(2025, 3, 1).strftime(way.removesuffix("%z")) + written
            ways.setdefault(_shape(example), []).append(way)
    return ways


def _shape(text: str) -> str:
    return re.sub(r"[A-Za-z]+", "a", re.sub(r"\d+", "9", text))


def _follows(sample: str, way: str) -> bool:
    try:
        datetime.datetime.strptime(sample, way)
    except ValueError:
        return False
    return True


def has_offset(samples: Sequence[str]) -> bool:
    """Return True when the samples carry their offset from UTC."""
    return _most(_OFFSET.search(sample) is not None for sample in samples)


def parse(cells: pa.ChunkedArray, way: str) -> IntArray:
    """Return times [ns since 1970, as if UTC where no offset is written], shape (rows,); `NO_TIME` where unreadable."""
    text = pd.Series(cells.to_pylist(), dtype="object").str.strip()
    if way == ISO:
        text = text.str.replace(",", ".")
    parsed = pd.to_datetime(text, format=way, errors="coerce", utc=True)
    parsed = parsed.where((parsed >= _FIRST) & (parsed <= _LAST))
    return np.asarray(parsed.dt.as_unit("ns").dt.tz_localize(None).to_numpy(dtype="datetime64[ns]").astype(np.int64))


def from_arrow(cells: pa.ChunkedArray) -> IntArray:
    """Return the times of an Arrow timestamp column [ns since 1970], shape (rows,); `NO_TIME` where empty."""
    wide = cells.cast(pa.timestamp("ns", tz=cells.type.tz)).cast(pa.int64())
    return np.asarray(pc.fill_null(wide, NO_TIME).to_numpy(), dtype=np.int64)


def epoch_unit(numbers: FloatArray) -> str | None:
    """Return the unit in which the numbers count from 1970 to a year between 1973 and 2100, None when in none."""
    low, high = np.nanmin(numbers), np.nanmax(numbers)
    return next((unit for unit, least, most in _EPOCH_UNITS if least <= low and high <= most), None)


def from_numbers(numbers: FloatArray, unit: str) -> IntArray:
    """Return the times of numbers that count `unit` from 1970 [ns], shape (rows,); `NO_TIME` where empty."""
    whole = np.where(np.isfinite(numbers), numbers, 0.0)
    return np.where(np.isfinite(numbers), np.rint(whole * UNIT_NS[unit]).astype(np.int64), NO_TIME)


def is_date_only(samples: Sequence[str]) -> bool:
    """Return True for dates without a time of day."""
    return _most(_DATE_ONLY.fullmatch(sample) is not None for sample in samples)


def is_time_only(samples: Sequence[str]) -> bool:
    """Return True for times of day without a date."""
    return _most(_TIME_ONLY.fullmatch(sample) is not None for sample in samples)
