"""The whole audit on closed-loop logs whose controllers are published, most of them logged far too coarsely.

Expected values were found once by plain regressions on the same files, outside the program. The data is described in
`eastman`.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from auditor.identify.controller import Recovery, recover_controller
from auditor.identify.model_file import read_model
from auditor.identify.validate import explained_percent
from auditor.logs.align import read_record
from auditor.loopfile import read_loop
from tests.outside.eastman import COLUMNS, RUNS, Eastman, controller, rows_of

pytestmark = pytest.mark.outside

Audit = Callable[[Path], tuple[int, dict[str, Any], Path]]

CANNOT_ANSWER = 4

CASCADES = ((9, 10), (21, 10), (18, 9), (19, 9))
"""Outer and inner measurement of the two cascades, and the valve: reactor temperature, stripper temperature."""


def recovered(loop: Path) -> Recovery:
    read = read_loop(loop)
    return recover_controller(read_record(read), read)


def told(result: dict[str, Any]) -> str:
    return "\n".join(result["verdict"]["reasons"])


def test_the_files_are_what_they_are_taken_for() -> None:
    assert rows_of("d00").shape == (500, len(COLUMNS))
    assert rows_of("d00_te").shape == (960, len(COLUMNS))
    # Levels of separator and stripper are held at 50 %.
    for run in ("d00", "d00_te"):
        assert rows_of(run)[:, [11, 14]].mean(axis=0) == pytest.approx([50.0, 50.0], abs=0.5)


@pytest.mark.parametrize("run", RUNS)
def test_the_level_controllers_come_back_from_every_run(eastman: Eastman, run: str) -> None:
    # Known: XMV(7) = 38.1 + 2.942857 (XMEAS(12) − 50), XMV(8) = 46.534 + 2.314286 (XMEAS(15) − 50), exact but for the
    # rounding of both columns to 0.001. The gain's sign is that of u = K (r − y).
    for measured, actuator, bias, slope in ((12, 7, 38.1, 2.942857), (15, 8, 46.534, 2.314286)):
        found = recovered(eastman.loop(run, measured, actuator))
        assert found.usable
        assert found.skew_samples == 0
        assert math.isinf(found.controller.integral_time)
        # Rounding averages out over hundreds of rows to well under 0.001.
        assert found.controller.gain == pytest.approx(-slope, abs=0.001)
        # The shutdown runs 6 and 18 have few rows away from limits, where half a step of rounding is 0.0005.
        assert found.bias == pytest.approx(bias, abs=0.002)
        assert found.own_law


@pytest.mark.parametrize(("measured", "actuator"), [(12, 7), (15, 8)])
def test_a_loop_that_holds_only_its_controllers_law_is_refused(
    eastman: Eastman, audited: Audit, measured: int, actuator: int
) -> None:
    # With no dead time asked for, a plant that explains 100 % "appears" here: 1/2.94, the controller's inverse.
    code, result, _ = audited(eastman.loop("d00_te", measured, actuator))
    assert code == CANNOT_ANSWER
    assert result["verdict"]["decision"] == "undecided"
    assert result["model"]["trust"] == "none"
    assert result["model"]["gain"] is None
    assert result["replays"] == []
    assert "only the controller's own law" in told(result)
    assert "setpoint step" in told(result)


@pytest.mark.parametrize("run", ["d00_te", "d01_te", "d09_te"])
def test_a_flow_that_follows_its_valve_at_once_is_not_taken_for_its_controller(
    eastman: Eastman, audited: Audit, run: str
) -> None:
    # XMEAS(1) = 0.0102 XMV(3) and noise: the valve "obeys" the flow with gain −98, the plant's inverse, to 1–8 %.
    loop = eastman.loop(run, 1, 3)
    assert recovered(loop).controller.gain == pytest.approx(-98.0, abs=1.0)  # noise of the flow biases by 1 %
    code, result, _ = audited(loop)
    assert code == CANNOT_ANSWER
    assert result["verdict"]["decision"] == "undecided"
    assert "a measurement that follows its actuator at once" in told(result)


@pytest.mark.parametrize(("measured", "actuator"), CASCADES)
def test_a_cascade_logged_too_coarsely_is_said_not_to_tell_its_controller(
    eastman: Eastman, audited: Audit, measured: int, actuator: int
) -> None:
    code, result, _ = audited(eastman.loop("d00_te", measured, actuator))
    assert code == CANNOT_ANSWER
    assert result["verdict"]["decision"] == "undecided"
    assert "P, PI or PID controller explains the actuator" in told(result)
    assert "the controller ran faster than the log" in told(result)
    assert result["controller"]["gain"] is None


@pytest.mark.parametrize("run", RUNS)
def test_no_run_gives_a_cascades_gains(eastman: Eastman, run: str) -> None:
    # In run 14 (a sticking valve) the outer loop swings so far that the valve follows it but for 7 %.
    for measured, actuator in ((9, 10), (18, 9)):
        found = recovered(eastman.loop(run, measured, actuator))
        assert not found.usable or found.own_law


@pytest.mark.parametrize(
    ("measured", "gain", "integral_time", "gain_of_plant", "reached"),
    # Plain regressions reach 89 % and 80 % of a held-out run. The controllers stated here are made up, and a wrong
    # controller bends the estimate: obtained 82 % and 54 %; the bounds leave a few points for other platforms.
    [(19, 0.05, "10min", (3.0, 4.5), 79.0), (18, 0.3, "30min", (0.1, 0.2), 50.0)],
)
def test_a_made_up_controller_earns_no_trust_even_where_the_plant_is_found(
    eastman: Eastman, audited: Audit, measured: int, gain: float, integral_time: str,
    gain_of_plant: tuple[float, float], reached: float,
) -> None:  # fmt: skip
    stated = controller(gain, integral_time) + "\n            [limits]\n            high = 1000\n            band = 2.0"
    code, result, folder = audited(eastman.loop("d00_te", measured, 9, more=stated))
    assert code == CANNOT_ANSWER
    assert result["model"]["trust"] == "none"
    assert result["controller"]["null_replay"] > 0.1
    assert any("another controller" in reason for reason in result["model"]["reasons"])
    assert result["verdict"]["decision"] == "undecided"
    plant = read_model(folder / "model.json").likeliest
    assert gain_of_plant[0] < plant.gain < gain_of_plant[1]
    other_run = read_record(read_loop(eastman.loop("d00", measured, 9)))
    assert explained_percent(plant, other_run) > reached


def test_far_too_large_gains_earn_no_trust(eastman: Eastman, audited: Audit) -> None:
    # What such a controller leaves of the valve is explained by the error to 99 %: it is its own wrong answer to it.
    code, result, _ = audited(eastman.loop("d00_te", 19, 9, more=controller(0.3, "30min")))
    assert code == CANNOT_ANSWER
    assert result["model"]["trust"] == "none"


@pytest.mark.parametrize("stated", ["", controller(-2.942857, "none")], ids=["from the log", "stated"])
@pytest.mark.parametrize(("measured", "actuator"), [(12, 7), (18, 9), (9, 10)])
def test_a_dead_loop_after_a_shutdown_is_told(
    eastman: Eastman, audited: Audit, measured: int, actuator: int, stated: str
) -> None:
    # Run 18 shuts down at row 688; from there on nothing moves.
    code, result, _ = audited(eastman.loop("d18_te", measured, actuator, first=688, more=stated))
    assert code == CANNOT_ANSWER
    assert result["verdict"]["decision"] == "undecided"
    stops = {f["kind"] for f in result["log"]["findings"] if f.get("weight") == "stops the answer"}
    assert "stuck" in stops
    assert "step of about 0.0 " not in told(result)
