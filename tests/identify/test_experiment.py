"""What is advised names sizes that can be carried out."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from simulated_loop import loop_file, simulate

from auditor.controllers.pid import Pid
from auditor.identify.experiment import suggest

RECORD = simulate(Pid(gain=5.0, integral_time=1200.0), n=600)


def test_a_step_and_a_bump_are_sized_from_the_record() -> None:
    advice = suggest(RECORD, loop_file(), 600.0)
    assert f"{3.0 * RECORD.error_deviation:.2g} held for 2 h" in advice
    assert f"bump of {float(np.std(RECORD.u)):.2g};" in advice


def test_no_step_of_nothing_is_advised_where_the_measurement_rests() -> None:
    resting = replace(RECORD, y=np.full(len(RECORD), 2.0))
    assert "a log in which the measurement moves" in suggest(resting, loop_file())


def test_a_resting_actuator_is_told() -> None:
    resting = replace(RECORD, u=np.full(len(RECORD), 50.0))
    assert "a log in which the actuator moves" in suggest(resting, loop_file())
