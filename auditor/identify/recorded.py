"""A controller and a record written the way the compiled floor reads them."""

from __future__ import annotations

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.controllers.pid import ANTI_WINDUPS, INTEGRALS, Pid
from auditor.kernels import rows
from auditor.logs.record import Record


def pack_settings(controller: Pid, record: Record) -> FloatArray:
    """Write the controller's numbers in the kernel's order."""
    pid = np.zeros(rows.PID_SIZE)
    pid[rows.GAIN] = controller.gain
    pid[rows.INTEGRAL_STEP] = controller.integral_gain * record.period
    pid[rows.RATE_GAIN] = controller.gain * controller.derivative_time
    pid[rows.FILTER] = controller.filter_time
    pid[rows.PERIOD] = record.period
    pid[rows.WEIGHT] = controller.setpoint_weight - 1.0
    pid[rows.DEADBAND] = controller.error_deadband
    pid[rows.LOW], pid[rows.HIGH] = controller.low, controller.high
    pid[rows.STEP] = controller.max_rate * record.period
    pid[rows.TRACKING] = controller.tracking_time
    pid[rows.RESOLUTION] = record.u_quantum or 0.0
    # A move of exactly one stored step must count as a move.
    pid[rows.SETPOINT_CHANGE] = 0.999 * (record.r_quantum or 0.0)
    return pid


def pack_form(controller: Pid) -> IntArray:
    """Write the choices of the controller as it was recorded: an update at every sample leaves no silence to bridge."""
    form = np.zeros(rows.FORM_SIZE, dtype=np.int64)
    form[rows.BRIDGE] = rows.BRIDGE_HELD
    form[rows.INTEGRATE] = INTEGRALS.index(controller.integral)
    form[rows.WINDUP] = ANTI_WINDUPS.index(controller.anti_windup)
    form[rows.RATE_ON_ERROR] = int(controller.derivative_on == "error")
    return form
