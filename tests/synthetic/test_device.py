"""The controller fed by hand, each figure worked out from the method's equations (3.1)–(3.4)."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from auditor.controllers import Pid
from auditor.synthetic.device import Memory, begin, execute, moved

PI = Pid(gain=2.0, integral_time=10.0)
# I = 1, D = 0, the error was 1 when the command 3 was given.
THEN = Memory(integral=1.0, derivative=0.0, error=1.0, slope_of=-4.0, command=3.0, since=3)


@pytest.mark.parametrize(
    ("integral", "gap_integral", "step"),
    [
        # K h / Ti = 0.2; e was 1 and is 3 after m = 4 samples: 0.2 · [3 c + b].
        ("forward", "held", 0.2 * (3 * 1 + 1)),
        ("backward", "held", 0.2 * (3 * 1 + 3)),
        ("trapezoid", "held", 0.2 * (3 * 1 + 2)),
        ("forward", "current", 0.2 * (3 * 3 + 1)),
        ("backward", "current", 0.2 * (3 * 3 + 3)),
        ("trapezoid", "current", 0.2 * (3 * 3 + 2)),
        # (1 − e^{−m h/Ti}) (u_held − I), whatever the recorded controller's form.
        ("forward", "saturating", (1 - math.exp(-0.4)) * (3.0 - 1.0)),
    ],
)
def test_the_integral_bridges_a_silence(integral, gap_integral, step):
    pid = replace(PI, integral=integral, gap_integral=gap_integral)
    now = execute(pid, THEN, r=5.0, y=2.0, m=4, h=1.0)
    assert now.integral == pytest.approx(1.0 + step)
    assert now.command == pytest.approx(2.0 * 3.0 + 1.0 + step)
    assert (now.error, now.since) == (3.0, 0)


@pytest.mark.parametrize("pid", [PI, replace(PI, setpoint_weight=0.4), replace(PI, derivative_time=5.0)])
def test_it_takes_over_without_moving_the_actuator(pid):
    started = begin(pid, 42.0, r=5.0, y=3.0)
    assert started.command == 42.0
    # Nothing has changed and nothing has passed: the same command again.
    assert execute(pid, started, r=5.0, y=3.0, m=0, h=1.0).command == pytest.approx(42.0)


def test_the_derivative_is_filtered_over_the_whole_silence():
    pid = replace(PI, integral_time=math.inf, derivative_time=6.0, derivative_filter=3.0)
    now = execute(pid, THEN._replace(derivative=0.5), r=5.0, y=2.0, m=4, h=1.0)
    # Tf = 2: (2 · 0.5 + 2 · 6 · (−2 − −4)) / (2 + 4).
    assert now.derivative == pytest.approx((1.0 + 24.0) / 6.0)
    on_error = execute(replace(pid, derivative_on="error"), THEN._replace(slope_of=1.0), r=5.0, y=2.0, m=4, h=1.0)
    assert on_error.derivative == pytest.approx(2 * 6 * (3.0 - 1.0) / 6.0)


def test_setpoint_weight_and_dead_band():
    weighted = execute(replace(PI, setpoint_weight=0.4, integral_time=math.inf), THEN, r=5.0, y=2.0, m=1, h=1.0)
    assert weighted.command == pytest.approx(2.0 * (0.4 * 5.0 - 2.0) + 1.0)
    numb = execute(replace(PI, error_deadband=3.0), THEN, r=5.0, y=2.0, m=1, h=1.0)
    # |e| = 3 is not beyond the dead-band of 3.
    assert numb.command == 1.0


@pytest.mark.parametrize(
    ("anti_windup", "tracking_time", "integral"),
    [
        # e = 3 with m = 1 gives I = 1.6 and v = 7.6 against the limit 5.
        ("none", 0.0, 1.6),
        ("back-calculation", 0.0, 1.6 + (5.0 - 7.6)),
        ("back-calculation", 4.0, 1.6 + (5.0 - 7.6) / 4.0),
        ("back-calculation", 0.5, 1.6 + (5.0 - 7.6)),
        ("freeze", 0.0, 1.0),
    ],
)
def test_anti_windup(anti_windup, tracking_time, integral):
    pid = replace(PI, integral="backward", high=5.0, anti_windup=anti_windup, tracking_time=tracking_time)
    now = execute(pid, THEN, r=5.0, y=2.0, m=1, h=1.0)
    assert now.command == 5.0
    assert now.integral == pytest.approx(integral)


def test_freezing_lets_the_integral_come_back():
    pid = replace(PI, integral="backward", low=-1.0, high=5.0, anti_windup="freeze")
    # v = −2 + 12 − 0.2 is above the limit, but the integral is on its way down.
    now = execute(pid, THEN._replace(integral=12.0), r=1.0, y=2.0, m=1, h=1.0)
    assert now.integral == pytest.approx(11.8)


def test_a_bias_is_not_wound():
    pid = replace(PI, integral_time=math.inf, high=5.0)
    assert execute(pid, THEN, r=9.0, y=2.0, m=7, h=1.0).integral == 1.0


def test_a_position_moves_at_most_one_step():
    assert moved(10.0, 14.0, 3.0) == 13.0
    assert moved(10.0, 5.0, 3.0) == 7.0
    assert moved(10.0, 11.0, 3.0) == 11.0
    assert moved(10.0, 99.0, math.inf) == 99.0
