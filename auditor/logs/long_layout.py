"""Logs with one row per time and tag: the tags that are needed, each with its own rows and stamps."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType

import numpy as np

from auditor.arrays import BoolArray, IntArray
from auditor.errors import LogError, Problem, raise_all
from auditor.logs.findings.base import Finding
from auditor.logs.parts import Part
from auditor.logs.quality import read_codes
from auditor.logs.raw_table import RawTable, Wanted
from auditor.loop import LogSource
from auditor.text import nearest

TAG, VALUE = "tag", "value"
_MOST_SHOWN = 40


def long_columns(source: LogSource) -> Wanted:
    """List the columns of a long log's files: the number column is the one of values."""
    value = VALUE if source.value is None else source.value
    tag = TAG if source.tag is None else source.tag
    return Wanted(time=source.time, numbers=MappingProxyType({value: "log.value"}), tag=tag, quality=source.quality)


def needed_rows(tables: Sequence[RawTable], source: LogSource, signals: Wanted) -> list[RawTable]:
    """Keep the rows of the tags that signals name, and rows without a tag, which are looked at with their stamps.

    Files without any such row are left out.

    Raises
    ------
    LogError
        When a tag is in none of the files.
    """
    header, known = long_columns(source).tag, Counter[str]()
    kept = []
    for table in tables:
        codes, tags = read_codes(table.tag)
        known.update(dict(zip(tags, np.bincount(codes, minlength=len(tags)).tolist(), strict=True)))
        needed = np.array([tag in (*tag_keys(signals), "", header) for tag in tags], dtype=np.bool_)
        rows = needed[codes]
        if rows.any():
            kept.append(table if rows.all() else table.keep(rows))
    del known[""]
    where = tables[0].label + (f" and {len(tables) - 1} more" if len(tables) > 1 else "")
    missing = [(tag, key) for tag, key in tag_keys(signals).items() if tag not in known]
    raise_all(LogError, [_missing(tag, key, known, where) for tag, key in missing])
    return kept


def tag_keys(signals: Wanted) -> Mapping[str, str]:
    """Map every tag that signals name to the loop file key that names it."""
    return dict(signals.numbers) | ({signals.mode: "signals.mode"} if signals.mode is not None else {})


def _missing(tag: str, key: str, known: Counter[str], where: str) -> Problem:
    tags = sorted(known)
    more = f" and {len(tags) - _MOST_SHOWN} more" if len(tags) > _MOST_SHOWN else ""
    close = next((name for name in tags if name.casefold() == tag.casefold()), None) or nearest(tag, tags)
    return Problem(
        what=f'The log has no rows of the tag "{tag}".',
        where=where,
        found="tags " + ", ".join(f'"{name}"' for name in tags[:_MOST_SHOWN]) + more,
        expected=f'"{tag}", named by {key}',
        do=f'did you mean "{close}"?' if close else f"set {key} to one of the tags found",
    )


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class ByTag:
    """The parts of every tag, each with the tag as the name of its value column, and what was left out."""

    parts: Mapping[str, Sequence[Part]]
    findings: tuple[Finding, ...]


def by_tag(parts: Sequence[Part], signals: Wanted) -> ByTag:
    """Part the rows by their tags; rows without a tag are left out, with a finding.

    Raises
    ------
    LogError
        When no row of a tag is left that has a time.
    """
    found: dict[str, list[Part]] = {tag: [] for tag in tag_keys(signals)}
    findings = []
    for part in parts:
        codes, tags = read_codes(part.table.tag)
        place = {tag: code for code, tag in enumerate(tags)}
        for tag in found:
            if tag in place:
                found[tag].append(_of_tag(part, codes == place[tag], tag, signals))
        if "" in place:
            findings.append(_untagged(part, codes == place[""]))
    raise_all(LogError, [_no_times(tag) for tag, own in found.items() if not own])
    return ByTag(parts=MappingProxyType(found), findings=tuple(findings))


def _no_times(tag: str) -> Problem:
    what = f'No row of the tag "{tag}" has a time and a value.'
    return Problem(what=what, where="[log]", do="export the log again, or name another tag")


def _of_tag(part: Part, rows: BoolArray, tag: str, signals: Wanted) -> Part:
    mine = part.keep(rows)
    (value,) = mine.table.numbers.values()
    numbers = {tag: value} if tag in signals.numbers else {}
    mode = value if tag == signals.mode else None
    return replace(mine, table=replace(mine.table, numbers=MappingProxyType(numbers), mode=mode))


def of_tag(signals: Wanted, tag: str) -> Wanted:
    """Return what signals want of one tag."""
    numbers = {tag: signals.numbers[tag]} if tag in signals.numbers else {}
    return replace(signals, numbers=MappingProxyType(numbers), mode=tag if tag == signals.mode else None)


def _untagged(part: Part, rows: BoolArray) -> Finding:
    at: IntArray = np.flatnonzero(rows)
    detail = f"{part.table.label}: {len(at)} rows without a tag, first at {part.table.locate(int(at[0]))}"
    return Finding(kind="untagged-row", start=None, end=None, count=len(at), detail=detail, effect="skipped")
