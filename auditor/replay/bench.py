"""`Bench`: a record and its likely plants, laid out for the compiled replay."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from auditor.arrays import FloatArray, IntArray, read_only
from auditor.controllers.pid import GAP_INTEGRALS, Pid
from auditor.identify.plant import Plant
from auditor.identify.recorded import pack_form, pack_settings
from auditor.kernels import rows as R
from auditor.logs.record import Record

PERTURBED = 8
"""Replays with a tiny perturbation of y: they show the spread that the event loop itself amplifies (method, §5.3)."""

PERTURBATION = 1e-9
"""Size of that perturbation, in deviations of the error."""

_LONGEST_TABLE = 100_000


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Bench:
    """Everything a replay needs besides the setting.

    Lanes are: every likely plant, then the naive answer (no plant: the record does not react), then `PERTURBED`
    copies of the most likely plant on a record perturbed by `PERTURBATION`.

    Attributes
    ----------
    record : Record
    controller : Pid
    rho : ndarray, shape (N,)
        What the controller does not explain of the actuator, injected into every command [actuator unit].
    plants : tuple of Plant
    best : int
    tau_cl_s : float
    A : ndarray, shape (n, n, lanes); B0, B1, C : ndarray, shape (n, lanes); delay, column : ndarray, shape (lanes,)
    noise : ndarray, shape (N, 1 + PERTURBED) [measurement unit]
    pid : ndarray; alpha : ndarray
        The controller for the kernel.
    """

    record: Record
    controller: Pid
    rho: FloatArray
    plants: tuple[Plant, ...]
    best: int
    tau_cl_s: float
    A: FloatArray
    B0: FloatArray
    B1: FloatArray
    C: FloatArray
    delay: IntArray
    column: IntArray
    noise: FloatArray
    pid: FloatArray
    alpha: FloatArray

    @property
    def draws(self) -> int:
        """Number of likely plants."""
        return len(self.plants)


def make_bench(
    record: Record, controller: Pid, plants: Sequence[Plant], best: int, tau_cl_s: float, rho: FloatArray | None = None
) -> Bench:
    """Lay out a record and its likely plants for replays.

    Parameters
    ----------
    rho : ndarray, shape (N,), optional
        Unexplained part of the actuator to inject [actuator unit]; none when left out.
    """
    chosen = [*plants, None, *([plants[best]] * PERTURBED)]
    A, B0, B1, C = _stack(chosen)
    column = np.zeros(len(chosen), dtype=np.int64)
    column[len(plants) + 1 :] = np.arange(1, PERTURBED + 1)
    return Bench(
        record=record,
        controller=controller,
        rho=read_only(np.zeros(len(record)) if rho is None else rho),
        plants=tuple(plants),
        best=best,
        tau_cl_s=tau_cl_s,
        A=A,
        B0=B0,
        B1=B1,
        C=C,
        delay=np.array([0 if p is None else p.delay for p in chosen], dtype=np.int64),
        column=column,
        noise=_perturbations(record),
        pid=pack_settings(controller, record),
        alpha=_forgetting(controller, record.period),
    )


def form_array(controller: Pid, link: str, signal: str, between: str) -> IntArray:
    """Write the choices of a controller and of a setting the way the kernel reads them."""
    form = pack_form(controller)
    form[R.BRIDGE] = GAP_INTEGRALS.index(controller.gap_integral)
    form[R.LINK_ACTUATOR] = int(link == "actuator")
    form[R.WATCH] = R.WATCH_MEASUREMENT if signal == "measurement" else R.WATCH_ERROR
    if link == "actuator":
        form[R.WATCH] = R.WATCH_COMMAND
    form[R.BETWEEN_RUN] = int(between == "run")
    form[R.FOLLOW_SETPOINT] = int(signal == "measurement")
    return form


def _stack(plants: Sequence[Plant | None]) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Pad all plants to the same number of states; None stays all zero."""
    n = max(p.order for p in plants if p is not None)
    lanes = len(plants)
    A, B0, B1, C = np.zeros((n, n, lanes)), np.zeros((n, lanes)), np.zeros((n, lanes)), np.zeros((n, lanes))
    for lane, plant in enumerate(plants):
        if plant is not None:
            m = plant.order
            A[:m, :m, lane], B0[:m, lane], B1[:m, lane], C[:m, lane] = plant.A, plant.B0, plant.B1, plant.C
    return A, B0, B1, C


def _perturbations(record: Record) -> FloatArray:
    """Column 0 is zero; the others are seeded noise of `PERTURBATION` deviations."""
    noise = np.zeros((len(record), 1 + PERTURBED))
    size = PERTURBATION * record.error_deviation
    noise[:, 1:] = size * np.random.default_rng(20_240).standard_normal((len(record), PERTURBED))
    return noise


def _forgetting(controller: Pid, period: float) -> FloatArray:
    """1 − exp(−m h / Ti) for m = 0, 1, … until it is 1 in floating point."""
    if np.isinf(controller.integral_time):
        return np.zeros(1)
    steps = min(int(40.0 * controller.integral_time / period) + 2, _LONGEST_TABLE)
    return np.asarray(-np.expm1(-np.arange(steps) * period / controller.integral_time))
