"""Run one setting over all lanes of a bench."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from auditor.arrays import FloatArray, IntArray
from auditor.errors import Problem, RuleError
from auditor.identify.plant import Plant
from auditor.identify.thresholds import DIVERGED
from auditor.kernels.replay import replay_span
from auditor.logs.record import Record
from auditor.replay.bench import Bench, form_array
from auditor.replay.types import Series, Setting
from auditor.rules import Rule, get_rule

NEVER = np.iinfo(np.int64).max // 4


TIE = 1e-6
"""Share of a stored step by which thresholds and bounds on the lattice are moved off it."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Lanes:
    """Replayed signals of all lanes over the whole record.

    Attributes
    ----------
    y, u : ndarray, shape (N, lanes)
        NaN outside the spans [measurement unit, actuator unit].
    updated : ndarray of uint8, shape (N, lanes)
    draws : int
        The first `draws` lanes are the likely plants, then comes the naive answer, then the perturbed ones.
    """

    y: FloatArray
    u: FloatArray
    updated: npt.NDArray[np.uint8]
    draws: int

    def series(self, lane: int) -> Series:
        """Return one lane on its own."""
        return Series(y=self.y[:, lane].copy(), u=self.u[:, lane].copy(), updated=self.updated[:, lane] == 1)


def guards(setting: Setting, period: float) -> tuple[int, int]:
    """Return min_gap and max_silence in samples (method, §4).

    Raises
    ------
    RuleError
        `max_silence` is shorter than `min_gap`.
    """
    gap = 0 if setting.min_gap_s is None else math.ceil(setting.min_gap_s / period - 1e-9)
    silence = NEVER if setting.max_silence_s is None else math.ceil(setting.max_silence_s / period - 1e-9)
    if silence < gap:
        raise RuleError(
            Problem(
                what=f"max_silence of rule '{setting.rule}' is shorter than its min_gap",
                found=f"max_silence {setting.max_silence_s} s, min_gap {setting.min_gap_s} s",
                expected="max_silence at least min_gap",
            )
        )
    return gap, max(silence, 1)


def replay_lanes(bench: Bench, setting: Setting) -> Lanes:
    """Replay one setting over every lane and span.

    Raises
    ------
    RuleError
        The rule or a setting is unknown or out of range.
    """
    rule = get_rule(setting.rule)
    values = rule.complete(setting.values)
    record = bench.record
    packed = np.array(rule.pack(_off_lattice(rule, values, setting, record), record.period), dtype=float)
    lanes = len(bench.delay)
    gap, silence = guards(setting, record.period)
    form = form_array(bench.controller, setting.link, setting.signal, setting.between)
    out_y, out_u = np.empty((len(record), lanes)), np.empty((len(record), lanes))
    outside = ~record.in_span
    out_y[outside] = out_u[outside] = np.nan
    out_updated = np.zeros((len(record), lanes), dtype=np.uint8)
    device = _device(bench, rule)
    for span in record.spans:
        replay_span(
            record.y, record.r, record.u, bench.rho, bench.noise, span.start, span.stop,
            bench.A, bench.B0, bench.B1, bench.C, bench.delay, bench.column, record.y_quantum or 0.0,
            bench.pid, form, bench.alpha,
            rule.fires, rule.memory_rows(values, record.period), _rows(packed, lanes), _same(gap, lanes),
            _same(silence, lanes),
            rule.predicts, *device,
            out_y, out_u, out_updated,
        )  # fmt: skip
    return Lanes(y=out_y, u=out_u, updated=out_updated, draws=bench.draws)


def _off_lattice(rule: Rule, values: dict[str, float], setting: Setting, record: Record) -> dict[str, float]:
    """Move a threshold off the lattice of a measurement stored in steps, where rounding would decide about ties.

    "More than three steps" must mean four, whatever the last bit of a difference says.
    """
    name = rule.threshold
    if not record.y_quantum or setting.link != "sensor" or name is None or rule.name == "level-crossing":
        return values
    return values | {name: values[name] + TIE * record.y_quantum}


def _rows(packed: FloatArray, lanes: int) -> FloatArray:
    return np.ascontiguousarray(np.broadcast_to(packed[:, None], (len(packed), lanes)))


def _same(value: int, lanes: int) -> IntArray:
    return np.full(lanes, value, dtype=np.int64)


def _device(bench: Bench, rule: Rule) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray, int, float]:
    """The model a device would carry: the most likely plant, whichever plant a lane takes for true."""
    plant = bench.plants[bench.best]
    samples = max(1, round(bench.tau_cl_s / bench.record.period))
    floor = unit_response(plant, samples) if rule.predicts else 1.0
    return (
        np.ascontiguousarray(plant.A, dtype=float).copy(), plant.B0.copy(), plant.B1.copy(), plant.C.copy(),
        plant.delay, floor,
    )  # fmt: skip


def unit_response(plant: Plant, samples: int) -> float:
    """Response of the plant, without its delay, to a unit input after `samples` periods [unit / actuator unit]."""
    x = np.zeros(plant.order)
    for _ in range(samples):
        x = plant.A @ x + plant.B0 + plant.B1
    response = float(plant.C @ x)
    return response if response != 0.0 else float(np.finfo(float).tiny)


def diverged(lanes: Lanes, bench: Bench) -> npt.NDArray[np.bool_]:
    """True for lanes whose loop would not have been stable (beyond `DIVERGED`, or no number), shape (lanes,)."""
    record = bench.record
    scale = DIVERGED * max(record.error_deviation, np.finfo(float).tiny)
    inside = record.in_span
    away = np.abs(lanes.y[inside] - record.y[inside, None])
    return np.asarray(~np.all(away < scale, axis=0))
