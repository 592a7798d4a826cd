"""Row numbers of the arrays the replay hands around; plain integers, frozen into compiled code."""

from __future__ import annotations

# now, sent: what a rule may look at, (rows, lanes)
WATCHED = 0  # the signal the rule is asked to watch: e, y, or the command that would be sent
ERROR = 1
MEASUREMENT = 2
SETPOINT = 3
PREDICTED = 4  # ŷ of the device's own model, run from the last update at both ends
SIGNALS = 5

# control: per-lane state of the controller and the actuator, (rows, lanes)
INTEGRAL = 0
DERIVATIVE = 1
ERROR_THEN = 2  # error at the last execution
SLOPE_THEN = 3  # derivative's signal at the last execution
RECEIVED = 4  # the measurement the controller has
COMMAND = 5  # the command the actuator has
POSITION = 6
SETPOINT_THEN = 7  # setpoint at the last execution
WOULD = 8  # the command computed at this sample, sent or not
DEVIATION = 9  # replayed less recorded position
HELD = 10  # what a saturating integral runs towards: the command less all that is not I or K e
CONTROL_ROWS = 11

# pid: one array of settings shared by all lanes
GAIN = 0
INTEGRAL_STEP = 1  # K h / Ti
RATE_GAIN = 2  # K Td
FILTER = 3  # Tf
PERIOD = 4
WEIGHT = 5  # setpoint weight less one
DEADBAND = 6
LOW = 7
HIGH = 8
STEP = 9  # largest move of the actuator in one period
TRACKING = 10  # tracking time, 0: at once
SETPOINT_CHANGE = 11  # smallest setpoint move that makes a measurement-watching controller run
RESOLUTION = 12  # step of the actuator's position, 0: continuous
PID_SIZE = 13

# form: integer choices shared by all lanes
BRIDGE = 0  # gap_integral
INTEGRATE = 1  # integral
WINDUP = 2
RATE_ON_ERROR = 3
LINK_ACTUATOR = 4
WATCH = 5
BETWEEN_RUN = 6
FOLLOW_SETPOINT = 7
FORM_SIZE = 8

BRIDGE_HELD, BRIDGE_CURRENT, BRIDGE_SATURATING = 0, 1, 2
FORWARD, BACKWARD, TRAPEZOID = 0, 1, 2
WINDUP_BACK, WINDUP_FREEZE, WINDUP_NONE = 0, 1, 2
WATCH_ERROR, WATCH_MEASUREMENT, WATCH_COMMAND = 0, 1, 2
