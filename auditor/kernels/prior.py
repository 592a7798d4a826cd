"""What the tuning of a controller tells about its plant, as a log density (see `auditor.identify.prior`).

People tune for a peak sensitivity Ms around 1.5, an integral time near the plant's long lag, and a loop faster
than its load. Coordinates are those of `zero_order_hold`; the time unit is one base period, the actuator's unit
is the controller's gain.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from auditor.arrays import FloatArray
from auditor.kernels import points
from auditor.kernels.jit import compiled

_SMALLEST_EXCESS = 1e-3  # Ms − 1 below this counts as this


class Tuning(NamedTuple):
    """Centres, spreads and log weights of the prior, and the controller it is read from.

    A term that does not apply (no integral action, a pole that is given) has an infinite spread.
    """

    log_excess: float  # centre of ln(Ms − 1)
    excess_above: float
    excess_below: float
    log_lag: float  # centre of ln(1/p) − ln Ti
    lag_above: float
    lag_below: float
    corner_above: float  # spread of ln(1 − phi) above ln kv
    crowding: float  # log density lost per e-fold by which each equal lag exceeds 1/p
    at_output: float
    mid_plant: float  # entries 2…5
    oscillatory: float
    zero: float
    zero_spread: float  # [base periods]
    log_integral_time: float  # ln Ti [ln base periods]


LONG_LAG = -1.0
"""Log prior below which no lag that is long against the integral time is pushed."""


@compiled
def two_sided(t: float, above: float, below: float) -> float:
    """Log density of a normal with one spread on each side, without its constant."""
    scaled = t / (above if t > 0.0 else below)
    return -0.5 * scaled * scaled


@compiled
def log_chain_prior(x: FloatArray, m: int, entry: int, tuning: Tuning) -> float:
    """Terms that only lag chains have."""
    slower = -x[points.LN_POLE] - tuning.log_integral_time - tuning.log_lag
    value = two_sided(slower, tuning.lag_above, tuning.lag_below)
    # People also tune integrators, whose lag is as long as one likes: a longer lag than the integral time says little.
    value = max(value, LONG_LAG) if slower > 0.0 else value
    if entry in (points.AT_INPUT, points.AT_BOTH_ENDS):
        faster = x[points.LN_CORNER] - x[points.LN_GAIN]
        value += two_sided(max(faster, 0.0), tuning.corner_above, tuning.corner_above)
    if m > 0:
        value -= tuning.crowding * max(x[points.LN_LAGS] - math.log(m) + x[points.LN_POLE], 0.0)
    return value


@compiled
def log_prior(x: FloatArray, m: int, entry: int, peak: float, tuning: Tuning) -> float:
    """Log prior of the point `x` with structure m, load entry and peak sensitivity `peak`."""
    excess = math.log(max(peak - 1.0, _SMALLEST_EXCESS)) - tuning.log_excess
    value = two_sided(excess, tuning.excess_above, tuning.excess_below)
    if entry == points.AT_OUTPUT:
        value += tuning.at_output
    elif entry > points.AT_OUTPUT:
        value += tuning.mid_plant
    value += tuning.oscillatory if m == points.OSCILLATOR else log_chain_prior(x, m, entry, tuning)
    beyond = abs(x[points.ZERO]) - points.ZERO_DEAD_ZONE
    if beyond > 0.0:
        value += tuning.zero + two_sided(beyond, tuning.zero_spread, tuning.zero_spread)
    return value
