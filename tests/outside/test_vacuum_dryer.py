"""The whole audit on a log measured in a plant: two loops of a cascade over 71 batches. The data: see `dryer`."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from auditor.arrays import FloatArray
from auditor.identify.plant import Load, Plant
from auditor.identify.validate import explained_percent
from auditor.logs.align import read_record
from auditor.logs.record import Record
from auditor.loopfile import read_loop
from tests.outside import dryer

pytestmark = pytest.mark.outside

Audit = Callable[[Path], tuple[int, dict[str, Any], Path]]

CANNOT_ANSWER = 4


def inner(log: Path, more: str = "") -> Path:
    return dryer.write_loop(log, "JacketTemperature", "JacketTemperatureSP", (0, 100), more)


def outer(log: Path) -> Path:
    return dryer.write_loop(log, "DryerTemp", "JacketTemperature", (-10, 120))


def regression(record: Record, batches: slice) -> tuple[Plant, float]:
    """Fit y[k] = a y[k−1] + b u[k−1] + c by least squares; return the plant, and how much one step ahead explains."""
    table = [
        np.stack([record.y[s.start : s.stop - 1], record.u[s.start : s.stop - 1], np.ones(len(s) - 1)], axis=1)
        for s in record.spans[batches]
    ]
    target = np.concatenate([record.y[s.start + 1 : s.stop] for s in record.spans[batches]])
    columns: FloatArray = np.concatenate(table)
    a, b, c = np.linalg.lstsq(columns, target, rcond=None)[0]
    left = target - columns @ np.array([a, b, c])
    return one_lag(a, b), 100.0 * (1.0 - float(np.std(left) / np.std(target)))


def one_lag(a: float, b: float) -> Plant:
    load = Load(entry="input", phi=0.9, walk=0.0, noise=0.0)
    return Plant(
        A=np.array([[a]]), B0=np.array([b]), B1=np.zeros(1), C=np.ones(1), delay=0, structure="lags", delay_s=0.0,
        gain=b / (1.0 - a), gain_per_s=None, time_constants_s=(), load=load,
    )  # fmt: skip


def test_batches_come_out_as_spans(dryer_log: Path) -> None:
    record = read_record(read_loop(inner(dryer_log)))
    assert [len(span) for span in record.spans] == [len(batch) for batch in dryer.batches()]
    found = {(f.kind, f.signal): f for f in record.findings}
    assert found["gap", ""].count == 70
    # 113 values of the valve lie below its 0, the lowest at −5.
    assert found["out-of-range", "JacketTemperatureSP"].count == 113
    saturated = [f for f in record.findings if f.kind == "saturation"]
    assert [f.count for f in saturated] == [2793, 121]
    # Stored to 0.001 over a range of 80 degrees: that is the last digit, not an archive's dead-band.
    assert record.y_deadband is None


@pytest.mark.parametrize("loop", [inner, outer], ids=["inner", "outer"])
def test_the_log_is_said_not_to_tell_its_controllers(
    dryer_log: Path, audited: Audit, loop: Callable[[Path], Path]
) -> None:
    code, result, _ = audited(loop(dryer_log))
    assert code == CANNOT_ANSWER
    assert len(result["log"]["spans"]) == 71
    assert result["verdict"]["decision"] == "undecided"
    assert result["model"]["trust"] == "none"
    assert "P, PI or PID controller explains the actuator" in told(result)


def test_batches_are_too_short_to_identify_with_a_stated_controller(dryer_log: Path, audited: Audit) -> None:
    stated = '[controller]\n        gain = 5.0\n        integral_time = "10min"'
    code, result, _ = audited(inner(dryer_log, stated))
    assert code == CANNOT_ANSWER
    assert "No stretch of the log is long enough" in told(result)
    assert "201 samples" in told(result)


def told(result: dict[str, Any]) -> str:
    return "\n".join(result["verdict"]["reasons"])


def test_a_single_lag_explains_two_thirds_of_unseen_batches(dryer_log: Path) -> None:
    # That a plant from valve to jacket can be had is no reproach to the program, which refuses for the controller's
    # and the batches' sake; the figure shows that its free run over many spans is the usual one. Of the batches the
    # regression has not seen it explains 60 % here; richer output-error fits are said to reach 70 %.
    record = read_record(read_loop(inner(dryer_log)))
    plant, _ = regression(record, slice(0, 35))
    assert explained_percent(plant, replace(record, spans=record.spans[35:])) == pytest.approx(60.0, abs=3.0)


def test_a_superb_step_ahead_does_not_hide_a_free_run_that_runs_away(dryer_log: Path) -> None:
    record = read_record(read_loop(outer(dryer_log)))
    plant, one_step = regression(record, slice(0, 35))
    assert one_step > 95.0
    assert abs(float(plant.A[0, 0])) > 1.0
    assert explained_percent(plant, replace(record, spans=record.spans[35:])) < 0.0
