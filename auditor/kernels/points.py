"""Numbers of the coordinates, structures and load entries of a point in the space of plants; plain integers.

The time unit is one base period, the actuator's unit the controller's gain.
"""

from __future__ import annotations

# Coordinates.
LN_GAIN = 0  # ln kv
LN_POLE = 1  # ln p; for the oscillator ln zeta
LN_LAGS = 2  # ln T, the equal lags together; for the oscillator ln 1/w0
DELAY = 3  # theta
LN_CORNER = 4  # ln(1 − phi) of the AR(1) load
LN_WALK = 5  # ln g, power of the random walk against the AR(1) load
LN_NOISE = 6  # ln R, power of the measurement noise against the AR(1) load, in units of kv²
ZERO = 7  # zero, with a dead zone
COORDINATES = 8

ZERO_DEAD_ZONE = 3.0
"""Values of the zero's coordinate up to this mean "no zero"; so a jump to and from none is a small step."""

# Structures: 0…4 are chains with that many equal lags.
OSCILLATOR = 5
STRUCTURES = 6

# Entries of the load: where it joins the loop.
AT_INPUT = 0
AT_OUTPUT = 1
AFTER_SHORT_LAGS = 2  # only the long lag follows
AFTER_LONG_LAG = 3  # only the m equal lags follow
BETWEEN_SHORT_LAGS = 4  # the long lag and m // 2 equal lags follow
AT_BOTH_ENDS = 5  # AR(1) load at the input, random walk at the output
ENTRIES = 6
