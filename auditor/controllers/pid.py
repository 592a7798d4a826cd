"""PI/PID controller with uneven execution times (method, §3, equations 3.1–3.4).

With an update at every sample this is the recorded controller; `gap_integral` says how a silence is bridged,
which is an assumption about the new controller that no log can tell.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

INTEGRALS = ("forward", "backward", "trapezoid")
GAP_INTEGRALS = ("held", "current", "saturating")
ANTI_WINDUPS = ("back-calculation", "freeze", "none")


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Pid:
    """A PI/PID controller in ideal form, u = K (β r − y) + I + D (with K e when the setpoint weight β is 1).

    Attributes
    ----------
    gain : float
        K [actuator unit / measurement unit]; its sign is the controller's action.
    integral_time : float
        Ti [s]; infinite for a controller without integral action (then I is a constant bias).
    derivative_time, derivative_filter : float
        Td [s] and N; the derivative's filter is Tf = Td / N.
    derivative_on : str
        "measurement" or "error".
    setpoint_weight : float
        β.
    error_deadband : float
        Errors up to this are taken as zero by the controller [measurement unit].
    integral, gap_integral, anti_windup : str
        Members of `INTEGRALS`, `GAP_INTEGRALS`, `ANTI_WINDUPS`.
    tracking_time : float
        Tt [s] of the back-calculation; 0 means at once.
    low, high, max_rate : float
        Actuator limits [actuator unit] and slew limit [actuator unit / s]; infinite when there are none.
    """

    gain: float
    integral_time: float = np.inf
    derivative_time: float = 0.0
    derivative_filter: float = 10.0
    derivative_on: str = "measurement"
    setpoint_weight: float = 1.0
    error_deadband: float = 0.0
    integral: str = "backward"
    gap_integral: str = "held"
    anti_windup: str = "back-calculation"
    tracking_time: float = 0.0
    low: float = -np.inf
    high: float = np.inf
    max_rate: float = np.inf

    @property
    def integral_gain(self) -> float:
        """K / Ti [actuator unit / (measurement unit · s)]."""
        return 0.0 if np.isinf(self.integral_time) else self.gain / self.integral_time

    @property
    def filter_time(self) -> float:
        """Tf = Td / N [s]."""
        return self.derivative_time / self.derivative_filter
