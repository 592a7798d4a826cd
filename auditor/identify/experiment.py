"""The change in operation that would let a log answer.

Sizes follow what was measured on loops with known truth in regulation without setpoint moves: a bumpless manual
period hardly helps; one manual interval that starts with a bump of one deviation of the actuator, or one setpoint
step of three deviations of the error, roughly halves the error of the answers.
"""

from __future__ import annotations

import numpy as np

from auditor.logs.record import Record
from auditor.loop import Loop
from auditor.text import duration, quantity

STEP_IN_ERRORS = 3.0
BUMP_IN_ACTUATORS = 1.0
SETTLINGS = 3.0
"""A step is held for three settling times: the answer has settled and the noise around it is seen."""


def suggest(record: Record, loop: Loop, tau_cl_s: float | None = None) -> str:
    """Say in one sentence which experiment would settle the case, in the loop's own units.

    Parameters
    ----------
    tau_cl_s : float, optional
        Closed-loop time constant [s]; a tenth of an hour, or 100 samples, stands in when it is not known.
    """
    tau = tau_cl_s if tau_cl_s else max(360.0, 100.0 * record.period)
    inside = record.in_span
    if not inside.any():
        return "A log with at least 200 usable samples in automatic operation is needed first."
    step = STEP_IN_ERRORS * record.error_deviation
    bump = BUMP_IN_ACTUATORS * float(np.std(record.u[inside]))
    hold = duration(max(4.0 * SETTLINGS * tau, 20.0 * record.period))
    if bump == 0.0:
        return (
            f"What would settle it: a log in which the actuator moves; one setpoint step, held for {hold}, is enough."
        )
    if step == 0.0:
        return "What would settle it: a log in which the measurement moves while the loop is in automatic operation."
    step_size = quantity(step, loop.signals.measurement.unit)
    bump_size = quantity(bump, loop.signals.actuator.unit)
    return (
        f"What would settle it: one setpoint step of about {step_size} held for {hold}, twice, or one manual interval "
        f"of {hold} that starts with an actuator bump of {bump_size}; then the same audit on the longer log."
    )
