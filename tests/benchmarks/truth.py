"""Loops whose truth is known: random plants, tuned controllers, loads; simulated four times finer than the log.

Written apart from the package on purpose: it shares no line with the code it judges.
"""

from __future__ import annotations

from dataclasses import dataclass

import numba
import numpy as np
from scipy.linalg import expm

FINE = 4  # steps of the simulation per base period
HEARTBEAT = 60  # samples without an update at most
SKIPPED = 300  # samples left out of every figure


@dataclass(frozen=True)
class TruthLoop:
    """A random loop: plant at the fine step, PI settings per base period, load, noise and setpoint."""

    A: np.ndarray
    B: np.ndarray
    C: np.ndarray
    delay: int  # fine steps
    gain: float
    integral_time: float  # base periods
    load: np.ndarray  # at the plant's input, fine steps
    noise: np.ndarray
    setpoint: np.ndarray


@numba.njit(cache=True)
def _seen(C, x):
    y = 0.0
    for i in range(len(C)):
        y += C[i] * x[i]
    return y


@numba.njit(cache=True)
def _advance(A, x, spare):
    """x ← A x; loops, because a call into BLAS costs more than these few products."""
    for i in range(len(x)):
        spare[i] = 0.0
        for j in range(len(x)):
            spare[i] += A[i, j] * x[j]
    for i in range(len(x)):
        x[i] = spare[i]


@numba.njit(cache=True)
def _run(A, B, C, delay, K, Ti, load, noise, r, delta):
    """The loop with send-on-delta on e (0: every sample); a silence is bridged with the error held."""
    N = len(r)
    n = len(B)
    x = np.zeros(n)
    spare = np.zeros(n)
    command = np.zeros(N * FINE)
    y = np.zeros(N)
    u = np.zeros(N)
    updates = 0
    e_sent = 0.0
    since = HEARTBEAT
    integral = 0.0
    for k in range(N):
        y[k] = _seen(C, x) + noise[k]
        e = r[k] - y[k]
        since += 1
        if k == 0 or abs(e - e_sent) > delta or since >= HEARTBEAT or delta == 0.0:
            steps = 1 if k == 0 else since
            integral += K / Ti * ((steps - 1) * e_sent + e)
            e_sent = e
            since = 0
            updates += 1 if k >= SKIPPED else 0
        u[k] = K * e_sent + integral
        for i in range(FINE):
            now = k * FINE + i
            command[now] = u[k]
            late = command[now - delay] if now >= delay else 0.0
            _advance(A, x, spare)
            for j in range(n):
                x[j] += B[j] * (late + load[now])
    return y, u, updates


@numba.njit(cache=True)
def _replay(A, B0, B1, C, delay, K, Ti, y, u, r, delta):
    """Deviation form around a record, with any sampled plant."""
    N = len(r)
    x = np.zeros(len(B0))
    spare = np.zeros(len(B0))
    moved = np.zeros(N)
    e_sent = 0.0
    since = 0
    updates = 0
    integral = 0.0
    total = 0.0
    command = 0.0
    for k in range(N):
        e = r[k] - y[k] - _seen(C, x)
        since += 1
        if k == 0:
            integral = u[0] - K * e
            e_sent = e
            since = 0
            command = u[0]
        elif abs(e - e_sent) > delta or since >= HEARTBEAT:
            integral += K / Ti * ((since - 1) * e_sent + e)
            e_sent = e
            since = 0
            command = K * e + integral
            updates += 1 if k >= SKIPPED else 0
        total += e * e if k >= SKIPPED else 0.0
        moved[k] = command - u[k]
        late = moved[k - delay] if k >= delay else 0.0
        early = moved[k - delay - 1] if k > delay else 0.0
        _advance(A, x, spare)
        for j in range(len(x)):
            x[j] += B0[j] * late + B1[j] * early
    return updates, np.sqrt(total / (N - SKIPPED))


def recorded(loop: TruthLoop) -> tuple[np.ndarray, np.ndarray]:
    """y and u of the loop with an update at every sample."""
    return truth_run(loop, 0.0)[:2]


def truth_run(loop: TruthLoop, delta: float) -> tuple[np.ndarray, np.ndarray, int, float]:
    """y, u, updates and RMS error of the loop with send-on-delta."""
    y, u, updates = _run(
        loop.A, loop.B, loop.C, loop.delay, loop.gain, loop.integral_time, loop.load, loop.noise, loop.setpoint, delta
    )
    return y, u, updates, float(np.sqrt(np.mean((loop.setpoint - y)[SKIPPED:] ** 2)))


def replayed(plant, loop: TruthLoop, y: np.ndarray, u: np.ndarray, delta: float) -> tuple[int, float]:
    """Updates and RMS error of a replay with an identified plant (A, B0, B1, C, delay)."""
    A, B0, B1, C = (np.array(M) for M in (plant.A, plant.B0, plant.B1, plant.C))
    return _replay(A, B0, B1, C, plant.delay, loop.gain, loop.integral_time, y, u, loop.setpoint, delta)


def delta_for_rate(loop: TruthLoop, rate: float) -> float:
    """The threshold whose true update rate is about `rate`."""
    low, high = 0.0, 20.0
    for _ in range(14):
        middle = 0.5 * (low + high)
        updates = truth_run(loop, middle)[2]
        low, high = (middle, high) if updates > rate * (len(loop.setpoint) - SKIPPED) else (low, middle)
    return 0.5 * (low + high)


def random_loop(seed: int, moves: int, N: int = 20_000) -> TruthLoop:
    """A random loop with error deviation 1 and `moves` setpoint steps of 2 to 5 deviations."""
    rng = np.random.default_rng(seed)
    lags, delay, kind = _random_plant(rng)
    A, B, C = _cascade(lags, kind)
    gain, integral_time = _tuned(lags, delay, kind, rng)
    load = _random_load(N * FINE, integral_time, rng)
    quiet = TruthLoop(A, B, C, round(delay * FINE), gain, integral_time, load, np.zeros(N), np.zeros(N))
    scale = 1.0 / np.std(recorded(quiet)[0][SKIPPED:])
    noise = rng.choice([0.01, 0.1]) * rng.normal(size=N)
    steps = np.zeros(N)
    for start in np.sort(rng.integers(SKIPPED, N, moves)):
        steps[start:] += rng.choice([-1.0, 1.0]) * rng.uniform(2.0, 5.0)
    return TruthLoop(A, B, C, quiet.delay, gain, integral_time, load * scale, noise, steps)


def _random_plant(rng: np.random.Generator) -> tuple[np.ndarray, float, str]:
    """Lags in base periods, delay, and whether the longest lag is an integrator or the response inverse."""
    kind = rng.choice(["lags", "integrator", "inverse"], p=[0.7, 0.15, 0.15])
    count = rng.integers(2 if kind == "inverse" else 1, 6)
    longest = np.exp(rng.uniform(np.log(15.0), np.log(100.0)))
    lags = np.sort(longest * np.concatenate([[1.0], rng.uniform(0.05, 0.6, count - 1)]))[::-1]
    delay = FINE * rng.uniform(1.0, 12.0)
    return lags, round(delay) / FINE, str(kind)


def _cascade(lags: np.ndarray, kind: str) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """The plant at the fine step; unit static gain, or unit ramp per longest lag."""
    n = len(lags)
    M = np.zeros((n + 1, n + 1))
    for i, lag in enumerate(lags[::-1]):
        M[i, i] = -1.0 / lag
        M[i, i - 1 if i else n] = 1.0 / lag
    if kind == "integrator":
        M[n - 1, n - 1] = 0.0
    C = np.zeros(n)
    C[-1] = 1.0
    if kind == "inverse":
        zero = -0.5 * lags[1]
        C[-1], C[-2] = 1.0 - zero / lags[0], zero / lags[0]
    E = expm(M / FINE)
    return E[:n, :n].copy(), E[:n, n].copy(), C


def _tuned(lags: np.ndarray, delay: float, kind: str, rng: np.random.Generator) -> tuple[float, float]:
    """PI settings by the half rule and a random speed (Skogestad, J. Process Control 13 (2003) 291)."""
    short = lags[1:]
    half = short[0] / 2.0 if len(short) else 0.0
    effective = delay + half + short[1:].sum() + (0.5 * short[0] if kind == "inverse" else 0.0) + 0.5
    lag = lags[0] if kind == "integrator" else lags[0] + half
    closed = effective * np.exp(rng.uniform(np.log(0.8), np.log(3.0)))
    integral_time = 4.0 * (closed + effective)
    return lag / (closed + effective), integral_time if kind == "integrator" else min(lag, integral_time)


def _random_load(n: int, integral_time: float, rng: np.random.Generator) -> np.ndarray:
    """Steps at random times, an AR(1) slower than the loop, a random walk held in place, or a day with an AR(1)."""
    kind = rng.integers(4)
    noise = rng.normal(size=n)
    if kind == 0:
        changes = np.flatnonzero(rng.random(n) < 1.0 / (FINE * 5.0 * integral_time))
        return np.repeat(noise[: len(changes) + 1], np.diff([0, *changes, n]))
    time_constant = FINE * (3000.0 if kind == 2 else integral_time * np.exp(rng.uniform(0.5, 2.5)))
    load = _filtered(noise, np.exp(-1.0 / time_constant))
    if kind == 3:
        load += 2.0 * np.std(load) * np.sin(2.0 * np.pi * np.arange(n) / (FINE * 1440.0))
    return load


@numba.njit(cache=True)
def _filtered(noise, pole):
    out = np.empty_like(noise)
    state = 0.0
    for k in range(len(noise)):
        state = pole * state + noise[k]
        out[k] = state
    return out
