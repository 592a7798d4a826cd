"""`Log`: time stamps and channels exactly as recorded, before anything is judged or aligned."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

import numpy.typing as npt

from auditor.arrays import BoolArray, FloatArray, IntArray
from auditor.logs.findings.base import Finding
from auditor.logs.record import InputFile


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Log:
    """The columns a loop file names, in the order of the file(s).

    Attributes
    ----------
    time : ndarray of int64, shape (rows,)
        Time stamp of each row [ns since 1970 UTC], in recorded order (not sorted, duplicates kept).
    channels : mapping of str to ndarray, shape (rows,)
        Raw numbers by column name, before scale and offset; NaN where the cell is empty or not a number.
    texts : mapping of str to ndarray of object, shape (rows,)
        For the mode column, and for number columns that hold text states: the cell as text, None where it is a
        plain number or empty. Mode cells are always there, as text.
    own : mapping of str to ndarray of bool, shape (rows,)
        For columns that have rows of their own (a tag of a long log): True where the row is one of them. A column
        that is not named here has all rows.
    rows : int
        Rows read from the files.
    inputs : tuple of InputFile
    zone : str
        IANA name of the log's own clock, "UTC" when stamps carry an offset or are epochs.
    findings : tuple of Finding
        What reading itself noticed (footer lines, text states in number columns, …).
    """

    time: IntArray
    channels: Mapping[str, FloatArray]
    texts: Mapping[str, npt.NDArray[Any]] = field(default_factory=lambda: MappingProxyType({}))
    own: Mapping[str, BoolArray] = field(default_factory=lambda: MappingProxyType({}))
    rows: int = 0
    inputs: tuple[InputFile, ...] = ()
    zone: str = "UTC"
    findings: tuple[Finding, ...] = ()
