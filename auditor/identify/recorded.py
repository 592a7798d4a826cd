"""A controller and a record written the way the compiled floor reads them."""

from __future__ import annotations

import numpy as np

from auditor.arrays import FloatArray, IntArray
from auditor.controllers.pid import ANTI_WINDUPS, INTEGRALS, Pid
from auditor.kernels import rows as R
from auditor.logs.record import Record


def pack_settings(controller: Pid, record: Record) -> FloatArray:
    """Write the controller's numbers in the kernel's order."""
    pid = np.zeros(R.PID_SIZE)
    pid[R.GAIN] = controller.gain
    pid[R.INTEGRAL_STEP] = controller.integral_gain * record.period
    pid[R.RATE_GAIN] = controller.gain * controller.derivative_time
    pid[R.FILTER] = controller.filter_time
    pid[R.PERIOD] = record.period
    pid[R.WEIGHT] = controller.setpoint_weight - 1.0
    pid[R.DEADBAND] = controller.error_deadband
    pid[R.LOW], pid[R.HIGH] = controller.low, controller.high
    pid[R.STEP] = controller.max_rate * record.period
    pid[R.TRACKING] = controller.tracking_time
    pid[R.RESOLUTION] = record.u_quantum or 0.0
    return pid


def pack_form(controller: Pid) -> IntArray:
    """Write the choices of the controller as it was recorded: an update at every sample leaves no silence to bridge."""
    form = np.zeros(R.FORM_SIZE, dtype=np.int64)
    form[R.BRIDGE] = R.BRIDGE_HELD
    form[R.INTEGRATE] = INTEGRALS.index(controller.integral)
    form[R.WINDUP] = ANTI_WINDUPS.index(controller.anti_windup)
    form[R.RATE_ON_ERROR] = int(controller.derivative_on == "error")
    return form
