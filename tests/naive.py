"""Slow oracle of the replay: one lane, plain Python floats, written from the equations of docs/method.md.

It shares no code with the package. Sums are taken in the order of the equations, so that the compiled replay must
agree bit for bit.
"""

from __future__ import annotations

import math

HUGE = 10**18


def clip(x, low, high):
    return min(max(x, low), high) if not math.isnan(x) else x


class Trigger:
    """One rule: `start(x)` at the first sample of a span, `ask(...)` at every later one."""

    def __init__(self, name, values, h):
        self.name, self.v, self.h = name, values, h

    def start(self, x):
        v = self.v
        self.sum = 0.0
        self.begun = False
        if self.name == "level-crossing":
            self.line = v.get("origin", 0.0) + v["spacing"] * _half_even((x - v.get("origin", 0.0)) / v["spacing"])
        if self.name == "linear-prediction":
            self.window = max(1, round(v["window_s"] / self.h))
            self.past = [x] * (self.window + 1)
            self.slope = 0.0
            self._push(x)

    def _push(self, x):
        self.past = [*self.past[1:], x]

    def ask(self, x, x_sent, e, y, y_hat, m):
        v = self.v
        if self.name == "periodic":
            due = v["every"] if self.begun else (v.get("phase", 0) or v["every"])
            fire = m >= due
            self.begun = self.begun or fire
            return fire
        if self.name in ("send-on-delta", "actuator-deadband"):
            return abs(x - x_sent) > v["delta"]
        if self.name == "send-on-area":
            self.sum = (0.0 if m == 1 else self.sum) + abs(x - x_sent)
            return self.h * self.sum > v["area"]
        if self.name == "error-area":
            self.sum = (0.0 if m == 1 else self.sum) + abs(e)
            return self.h * self.sum > v["area"] or abs(x - x_sent) > v.get("delta", math.inf)
        if self.name == "level-crossing":
            fire = abs(x - self.line) >= v["spacing"] + v.get("hysteresis", 0.0)
            if fire:
                self.line = self.line + v["spacing"] * math.trunc((x - self.line) / v["spacing"])
            return fire
        if self.name == "linear-prediction":
            if m == 1:
                self.slope = (x_sent - self.past[0]) / self.window
            fire = abs(x - (x_sent + self.slope * m)) > v["delta"]
            self._push(x)
            return fire
        if self.name == "model-prediction":
            return abs(y - y_hat) > v["delta"]
        raise AssertionError(self.name)


def _half_even(x):
    return float(round(x))


class Controller:
    """PI/PID with uneven execution times, equations (3.1)–(3.3)."""

    def __init__(self, c, h):
        self.c, self.h = c, h
        self.kih = (0.0 if math.isinf(c.integral_time) else c.gain / c.integral_time) * h

    def error(self, r, y):
        e = r - y
        return 0.0 if abs(e) <= self.c.error_deadband else e

    def slope_signal(self, e, y):
        return e if self.c.derivative_on == "error" else -y

    def start(self, r, y, u0):
        c = self.c
        e = self.error(r, y)
        self.I = u0 - c.gain * (e + (c.setpoint_weight - 1.0) * r)
        self.D = 0.0
        self.e, self.s, self.r = e, self.slope_signal(e, y), r
        self.command = clip(u0, c.low, c.high)
        self.held = self.command - c.gain * (c.setpoint_weight - 1.0) * r
        return self.command

    def run(self, r, y, rho, m):
        c, h = self.c, self.h
        e = self.error(r, y)
        s = self.slope_signal(e, y)
        tf = c.derivative_time / c.derivative_filter
        D = (tf * self.D + c.gain * c.derivative_time * (s - self.s)) / (tf + m * h)
        b = {"forward": self.e, "backward": e, "trapezoid": 0.5 * (self.e + e)}[c.integral]
        if c.gap_integral == "saturating":
            alpha = 0.0 if math.isinf(c.integral_time) else -_expm1(-m * h / c.integral_time)
            I = self.I + alpha * (self.held - self.I)
        else:
            bridge = e if c.gap_integral == "current" else self.e
            I = self.I + self.kih * ((m - 1.0) * bridge + b)
        fixed = c.gain * (e + (c.setpoint_weight - 1.0) * r) + D
        v = fixed + I
        if (
            c.anti_windup == "freeze"
            and self.kih != 0.0
            and ((v + rho > c.high and self.I < I) or (v + rho < c.low and self.I > I))
        ):
            I = self.I
            v = fixed + I
        command = clip(v + rho, c.low, c.high)
        if c.anti_windup == "back-calculation" and self.kih != 0.0:
            share = 1.0 if c.tracking_time == 0 else min(1.0, m * h / c.tracking_time)
            I = I + (command - v - rho) * share
        self.I, self.D, self.e, self.s, self.r = I, D, e, s, r
        self.held = command - rho - D - c.gain * (c.setpoint_weight - 1.0) * r
        return command


def _expm1(x):
    import numpy as np

    return float(np.expm1(np.array([x]))[0])


class Plant:
    """Deviation state of one plant, equation (2.1)."""

    def __init__(self, A, B0, B1, C, d):
        self.A, self.B0, self.B1, self.C, self.d = A, B0, B1, C, d
        self.x = [0.0] * len(C)
        self.past = []

    def output(self):
        total = self.C[0] * self.x[0]
        for i in range(1, len(self.C)):
            total += self.C[i] * self.x[i]
        return total

    def input(self, back):
        k = len(self.past) - 1 - back
        return self.past[k] if k >= 0 else 0.0

    def advance(self, delta):
        self.past.append(delta)
        new = []
        for i in range(len(self.C)):
            total = self.B0[i] * self.input(self.d) + self.B1[i] * self.input(self.d + 1)
            for j in range(len(self.C)):
                total += self.A[i][j] * self.x[j]
            new.append(total)
        self.x = new


class Device:
    """The model both ends run: driven by positions since the span began and by a constant load it learns."""

    def __init__(self, A, B0, B1, C, d, floor, u0):
        self.A, self.B0, self.B1, self.C, self.d, self.floor, self.u0 = A, B0, B1, C, d, floor, u0
        self.x = [0.0] * len(C)
        self.unit = [0.0] * len(C)
        self.load, self.offset = 0.0, 0.0
        self.past = []

    def predicted(self):
        total = self.offset
        for c, x in zip(self.C, self.x, strict=True):
            total += c * x
        return total

    def correct(self, y):
        missed = y - self.predicted()
        response = 0.0
        for c, x in zip(self.C, self.unit, strict=True):
            response += c * x
        if abs(response) <= abs(self.floor):
            response = self.floor
        self.offset += missed
        self.load += missed / response
        self.unit = [0.0] * len(self.C)

    def advance(self, u):
        self.past.append(u)
        k = len(self.past) - 1
        new = self.past[k - self.d] - self.u0 if k >= self.d else 0.0
        old = self.past[k - self.d - 1] - self.u0 if k >= self.d + 1 else 0.0
        x, unit = [], []
        for i in range(len(self.C)):
            a = self.B0[i] * (new + self.load) + self.B1[i] * (old + self.load)
            b = self.B0[i] + self.B1[i]
            for j in range(len(self.C)):
                a += self.A[i][j] * self.x[j]
                b += self.A[i][j] * self.unit[j]
            x.append(a)
            unit.append(b)
        self.x, self.unit = x, unit


def replay(
    y,
    r,
    u,
    rho,
    plant,
    controller,
    rule,
    values,
    h,
    *,
    link="sensor",
    signal="error",
    between="hold",
    min_gap=0,
    max_silence=HUGE,
    y_step=0.0,
    u_step=0.0,
    r_step=0.0,
    device=None,
):
    """Replay one span; returns lists (y, u, updated).

    plant : (A, B0, B1, C, d) as nested lists; device : (A, B0, B1, C, d, floor) or None; guards in samples.
    """  # fmt: skip
    p = Plant(*plant)
    c = Controller(controller, h)
    t = Trigger(rule, values, h)
    model = Device(*device, u0=u[0]) if device else None
    since_run, latched, request = 0, False, False
    out_y, out_u, out_sent = [], [], []
    last, x_sent = 0, 0.0
    for k in range(len(y)):
        away = p.output()
        if y_step > 0:
            away = y_step * _half_even(away / y_step)
        yk = y[k] + 0.0 + away
        e = r[k] - yk
        if k == 0:
            command = c.start(r[0], yk, u[0])
            received, position, would = yk, u[0], command
            if model:
                model.offset = yk
        elif link == "actuator":
            would = c.run(r[k], yk, rho[k], 1)
        y_hat = model.predicted() if model else 0.0
        x = would if link == "actuator" else (yk if signal == "measurement" else e)
        if k == 0:
            t.start(x)
            update = True
        else:
            m = k - last
            request = t.ask(x, x_sent, e, yk, y_hat, m) or latched
            update = m >= min_gap and (request or m >= max_silence)
        latched = request and not update if k else False
        if link == "actuator":
            command = would if update else command
        elif k:
            moved = signal == "measurement" and abs(r[k] - c.r) > r_step
            received = yk if update else received
            if update or moved or between == "run":
                command = would = c.run(r[k], received, rho[k], since_run)
                since_run = 0
        if update:
            last, x_sent = k, x
            if model:
                model.correct(yk)
        if k:
            step = controller.max_rate * h
            position = command if math.isinf(step) else position + clip(command - position, -step, step)
        delta = position - u[k]
        if u_step > 0:
            delta = u_step * _half_even(delta / u_step)
        out_y.append(yk)
        out_u.append(u[k] + delta)
        out_sent.append(update)
        p.advance(delta if k else 0.0)
        if model:
            model.advance(u[k] + delta)
        since_run += 1
    return out_y, out_u, out_sent
