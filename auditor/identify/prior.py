"""What the controller's own tuning tells about the plant: a weak prior.

Someone tuned the loop, and people tune for a peak sensitivity around 1.5, for an integral time near the plant's long
lag, and for a loop faster than its load (Åström & Hägglund, Advanced PID Control, 2006; cited from memory). In pure
regulation the likelihood has several nearly equal maxima, and this is what tells them apart; with setpoint moves it
is overruled. The centres and spreads are a choice; the bench in `tests/benchmarks` says what it is worth.
"""

from __future__ import annotations

import numpy as np

from auditor.controllers.pid import Pid
from auditor.kernels.prior import Tuning

_USUAL_PEAK = 1.5


def tuning(controller: Pid, period: float, plant: str | None) -> Tuning:
    """Return the prior for a controller.

    Parameters
    ----------
    controller : Pid
    period : float
        Base period [s].
    plant : str or None
        Declared type; an integrating plant has no long lag, so that term is left out, as it is for a controller
        without integral action.
    """
    has_lag_term = plant != "integrating" and np.isfinite(controller.integral_time)
    return Tuning(
        log_excess=float(np.log(_USUAL_PEAK - 1.0)),
        excess_above=0.6,
        excess_below=1.2,
        log_lag=0.1,
        lag_above=0.7 if has_lag_term else np.inf,
        lag_below=0.35 if has_lag_term else np.inf,
        corner_above=0.6,
        crowding=2.0,
        at_output=-1.5,
        mid_plant=-2.0,
        oscillatory=-2.0,
        zero=-4.0,
        zero_spread=8.0,
        log_integral_time=float(np.log(controller.integral_time / period)) if has_lag_term else 0.0,
    )
