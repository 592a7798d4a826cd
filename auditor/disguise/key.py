"""`Key`: what a disguise changed, so that its owner can undo it.

Values are hidden as ``2^a · value + offset``. A power of two changes no digit of a binary number, so that every sum,
product and comparison of a replay comes out with the same digits; the offset is only used where it is exact as well.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, fields
from pathlib import Path
from types import MappingProxyType

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.errors import LoopFileError, Problem

FORMAT, VERSION = "auditor/disguise-key", 1


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Key:
    """What was changed.

    Attributes
    ----------
    loop : str
        The loop's own name.
    zone : str
        IANA name of the log's own clock.
    columns, units : mapping of str to str
        The log's own columns and units by their neutral names.
    time_shift_ns : int
        What was added to every time stamp [ns].
    measurement_exponent, actuator_exponent : int
        a and b: measurement and setpoint were multiplied by 2^a, the actuator by 2^b.
    measurement_offset : float
        Added to measurement and setpoint after the multiplication [hidden unit]; zero where it would not be exact.
    disturbance_exponents : tuple of int
        The same for the measured disturbances, in the order of the loop file.
    """

    loop: str
    zone: str
    columns: Mapping[str, str]
    units: Mapping[str, str]
    time_shift_ns: int
    measurement_exponent: int
    measurement_offset: float
    actuator_exponent: int
    disturbance_exponents: tuple[int, ...] = ()

    def hide_measurement(self, values: FloatArray) -> FloatArray:
        """Return measurements or setpoints as the copy has them."""
        return np.asarray(np.ldexp(values, self.measurement_exponent) + self.measurement_offset)

    def measurement(self, hidden: FloatArray) -> FloatArray:
        """Return measurements or setpoints of the copy in the loop's own unit."""
        return np.asarray(np.ldexp(np.asarray(hidden) - self.measurement_offset, -self.measurement_exponent))

    def error(self, hidden: FloatArray) -> FloatArray:
        """Return errors, thresholds and bands of the copy in the loop's own unit."""
        return np.asarray(np.ldexp(hidden, -self.measurement_exponent))

    def actuator(self, hidden: FloatArray) -> FloatArray:
        """Return actuator values of the copy in the loop's own unit."""
        return np.asarray(np.ldexp(hidden, -self.actuator_exponent))

    def disturbance(self, number: int, hidden: FloatArray) -> FloatArray:
        """Return values of disturbance `number` (from 0) of the copy in its own unit."""
        return np.asarray(np.ldexp(hidden, -self.disturbance_exponents[number]))

    def time(self, hidden: int | IntArray) -> IntArray:
        """Return times of the copy as they were [ns since 1970 UTC]."""
        return np.asarray(np.asarray(hidden, dtype=np.int64) - self.time_shift_ns)


def key_text(key: Key) -> str:
    """Write a key as JSON; floats keep every digit."""
    body = {field.name: getattr(key, field.name) for field in fields(key)}
    plain = {name: dict(value) if isinstance(value, Mapping) else value for name, value in body.items()}
    return json.dumps({"format": FORMAT, "version": VERSION, **plain}, indent=2, ensure_ascii=False) + "\n"


def read_key(path: str | Path) -> Key:
    """Read a key.

    Raises
    ------
    LoopFileError
        The file cannot be read, or is no key of this version.
    """
    try:
        body = json.loads(Path(path).read_text("utf-8"))
        if body.pop("format") != FORMAT or body.pop("version") != VERSION:
            raise ValueError("another format or version")
        for name in ("columns", "units"):
            body[name] = MappingProxyType(body[name])
        return Key(**{**body, "disturbance_exponents": tuple(body["disturbance_exponents"])})
    except (OSError, ValueError, KeyError, TypeError, AttributeError) as error:
        raise LoopFileError(
            Problem(
                what="this is no key of a disguised loop",
                where=str(path),
                found=str(error),
                expected=f"JSON with format {FORMAT}, version {VERSION}",
                do="give the file that `auditor disguise` wrote beside the loop file",
            )
        ) from None
