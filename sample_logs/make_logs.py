"""Make the four sample logs: ``python sample_logs/make_logs.py [--out DIR]``.

Places, companies and numbers are invented. Each scenario is a loop whose truth is known; its load is drawn on a
quarter of the base period, the plant between the samples is solved exactly. README.md says what is in the files.
"""

from __future__ import annotations

import argparse
import math
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from auditor.controllers import Pid
from auditor.synthetic import Decide, Simulation, Truth, chain, simulate

FINE = 4
"""Parts of a base period on which the load is drawn."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Scenario:
    """One loop with all that acts on it, so that it can be run again under another rule.

    `truth` and `controller` are the loop; `setpoint`, `noise` shape (N,) and `load` shape (N, FINE) what acts on it;
    `manual` shape (N,) the positions asked for by hand (NaN: automatic); `start` the first stamp [UTC or local];
    `low`, `high` the limits its owner states.
    """

    truth: Truth
    controller: Pid
    period: float
    setpoint: np.ndarray
    load: np.ndarray
    noise: np.ndarray
    y_step: float
    u_step: float
    start: pd.Timestamp
    low: float
    high: float
    manual: np.ndarray | None = None
    extra: dict[str, np.ndarray] = field(default_factory=dict)

    def run(self, decide: Decide | None = None, controller: Pid | None = None) -> Simulation:
        """Run the loop under an update rule, None for every sample, with the same load and noise."""
        return simulate(
            self.truth,
            controller or self.controller,
            self.setpoint,
            self.load,
            self.noise,
            period=self.period,
            y_step=self.y_step,
            u_step=self.u_step,
            manual=self.manual,
            decide=decide,
        )

    @property
    def stamps(self) -> pd.DatetimeIndex:
        """Time of every sample."""
        return self.start + pd.to_timedelta(np.arange(len(self.setpoint)) * self.period, unit="s")


def canal_pool(seed: int = 1) -> Scenario:
    """Level of an irrigation canal pool: integrator, 9.4 min of travel and a wave lag; irrigators open and close."""
    rng, period, days = np.random.default_rng([seed, 1]), 60.0, 21
    count = days * 1440
    hours = fine_hours(count, period)
    taken = np.zeros_like(hours)
    for flow, first, length, every in ((0.22, 6, 9, 48), (0.30, 18, 11, 72), (0.16, 5, 7, 24), (0.26, 30, 14, 96)):
        # A turnout is opened by hand, so never quite on the hour the schedule says.
        for begin in np.arange(first, days * 24, every):
            taken += flow * between(hours, begin + rng.normal(0, 0.3), length + rng.normal(0, 0.5))
    taken += 0.09 * pulses(rng, hours, per_day=2.5, mean_hours=2.0)
    passed_on = 0.08 * np.sin(2 * np.pi * (hours - 9.0) / 24) + 0.03 * drift(rng, count * FINE, 3 * 3600, period / FINE)
    surface = 11_000.0
    setpoint = np.full(count, 2.10)
    for day, level in ((2.3, 2.14), (5.4, 2.10), (7.35, 2.06), (9.6, 2.10), (12.3, 2.15), (14.6, 2.10), (18.4, 2.07)):
        setpoint[int(day * 1440) :] = level
    manual = np.full(count, np.nan)
    # A gate inspection: the position is held by hand, opened a little further half way, then given back.
    manual[15 * 1440 + 560 : 15 * 1440 + 600] = 44.0
    manual[15 * 1440 + 600 : 15 * 1440 + 635] = 51.0
    truth = chain(
        (180.0, math.inf, 30.0), gain=1.0 / surface, delay_s=564.0, load_stage=1, load_gain=-1.0 / surface
    ).resting(2.10, 46.0, lambda opening: 4.0 * (max(opening, 0.0) / 100) ** 0.9)
    return Scenario(
        truth=truth,
        controller=Pid(
            gain=150.0, integral_time=5400.0, integral="forward", low=0.0, high=100.0, max_rate=0.25
        ),
        period=period,
        setpoint=setpoint,
        load=taken - taken.mean() + passed_on,
        noise=rng.normal(0, 0.002, count),
        y_step=0.001,
        u_step=0.01,
        manual=manual,
        start=pd.Timestamp("2025-06-02T00:00:00Z"),
        low=1.90,
        high=2.35,
    )


def aeration(seed: int = 1) -> Scenario:
    """Dissolved oxygen of an aeration tank: tank, air main and sensor lag; daily load, a wet night, constant setpoint."""
    rng, period, days = np.random.default_rng([seed, 2]), 10.0, 4
    count = days * 8640
    hours = fine_hours(count, period)
    clock = hours % 24
    day = np.exp(-(((clock - 10) / 2.6) ** 2)) + 0.8 * np.exp(-(((clock - 20) / 2.8) ** 2))
    storm = between(hours, 49.0, 9.0) * (1 - np.exp(-(hours - 49.0).clip(0) / 1.5))
    # Rain dilutes what comes in, but it comes in gusts.
    uptake = 9.0 * (day - day.mean()) - 6.0 * storm
    uptake += 8.0 * (1 + 0.8 * storm) * drift(rng, count * FINE, 900.0, period / FINE)
    manual = np.full(count, np.nan)
    manual[2 * 360 * 24 - 360 * 14 : 2 * 360 * 24 - 360 * 14 + 150] = 55.0
    truth = chain((45.0, 420.0, 60.0), gain=0.075, delay_s=17.0, load_stage=1, load_gain=-0.075).resting(
        2.0, 55.0, lambda speed: 100.0 * (max(speed, 0.0) / 100) ** 0.8
    )
    return Scenario(
        truth=truth,
        controller=Pid(gain=45.0, integral_time=300.0, integral="backward", low=20.0, high=100.0),
        period=period,
        setpoint=np.full(count, 2.0),
        load=uptake,
        noise=rng.normal(0, 0.01, count),
        y_step=0.01,
        u_step=0.1,
        manual=manual,
        start=pd.Timestamp("2025-03-17T00:00:00"),
        low=0.8,
        high=3.5,
    )


def heat_station(seed: int = 1) -> Scenario:
    """Supply temperature of a district-heat station: transport delay, exchanger and pocket lag; valve in half per cents."""
    rng, period = np.random.default_rng([seed, 3]), 2.0
    count = 43_200
    hours = fine_hours(count, period)
    drawn = 1.0 * pulses(rng, hours, per_day=70, mean_hours=0.12) + 0.6 * pulses(rng, hours, per_day=140, mean_hours=0.04)
    morning = 3.0 * np.exp(-(((hours - 6.8) / 1.2) ** 2)) + 2.0 * np.exp(-(((hours - 19.0) / 1.8) ** 2))
    load = 1.6 * drawn + 1.5 * morning + 0.7 * drift(rng, count * FINE, 300.0, period / FINE)
    outdoor = 4.0 - 5.0 * np.cos(2 * np.pi * (hours[:, 0] - 15.0) / 24)
    setpoint = 0.5 * np.round((62.0 - 0.9 * (outdoor - 4.0)) / 0.5)
    setpoint = np.repeat(setpoint[::450], 450)[:count]
    truth = chain((6.0, 32.0, 9.0), gain=0.55, delay_s=9.0, load_stage=1, load_gain=-1.0).resting(
        float(setpoint[0]), 40.0, lambda lift: 40.0 * 1.6 ** ((lift - 40.0) / 40.0)
    )
    return Scenario(
        truth=truth,
        controller=Pid(gain=4.2, integral_time=26.0, integral="backward", low=0.0, high=100.0, max_rate=1.5),
        period=period,
        setpoint=setpoint,
        load=load - load.mean(),
        noise=rng.normal(0, 0.04, count),
        y_step=0.01,
        u_step=0.5,
        start=pd.Timestamp("2025-01-21T00:00:00Z"),
        low=53.0,
        high=71.0,
    )


def booster_pump(seed: int = 1) -> Scenario:
    """Pressure behind a booster pump: drive, mains and a small vessel; taps all the time and hydrants now and then."""
    rng, period = np.random.default_rng([seed, 4]), 0.5
    count = 43_200
    hours = fine_hours(count, period)
    flow = 12.0 + 0.5 * drift(rng, count * FINE, 40.0, period / FINE)
    flow += 1.0 * pulses(rng, hours, per_day=900, mean_hours=0.02)
    # A drill: the brigade opens and closes the same hydrant again and again, in about a second each time.
    hydrant = np.zeros_like(hours)
    for begin in np.arange(0.4, 5.8, 0.2) + rng.uniform(-0.06, 0.06, 27):
        hydrant += 7.5 * opened(hours, begin, rng.uniform(0.02, 0.08), 1.0 / 3600)
    loss = 0.0045 * (flow + hydrant) ** 2
    setpoint = np.full(count, 4.0)
    for hour, pressure in ((0.9, 4.1), (1.3, 4.0), (2.1, 4.2), (2.5, 4.0), (3.3, 4.15), (3.7, 4.0), (4.9, 4.1), (5.3, 4.0)):
        setpoint[int(hour * 7200) :] = pressure
    truth = chain((0.9, 4.0, 0.4), gain=1.0, delay_s=0.6, load_stage=1, load_gain=-1.0).resting(
        4.0, 70.0, lambda speed: 10.5 * (max(speed, 0.0) / 100) ** 2
    )
    return Scenario(
        truth=truth,
        controller=Pid(gain=8.0, integral_time=4.0, integral="backward", low=30.0, high=100.0),
        period=period,
        setpoint=setpoint,
        load=loss - loss.mean(),
        noise=rng.normal(0, 0.004, count),
        y_step=0.01,
        u_step=0.01,
        start=pd.Timestamp("2025-09-09T06:00:00", tz="Europe/Oslo"),
        low=3.3,
        high=5.5,
    )


SCENARIOS: dict[str, Callable[..., Scenario]] = {
    "canal-pool": canal_pool,
    "aeration": aeration,
    "heat-station": heat_station,
    "booster-pump": booster_pump,
}


def fine_hours(count: int, period: float) -> np.ndarray:
    """Hours since the start on the fine clock, shape (count, FINE)."""
    return (np.arange(count * FINE) * (period / FINE) / 3600).reshape(count, FINE)


def between(hours: np.ndarray, begin: float, length: float) -> np.ndarray:
    """One from `begin` on for `length` hours, else zero."""
    return ((hours >= begin) & (hours < begin + length)).astype(float)


def opened(hours: np.ndarray, begin: float, length: float, ramp: float) -> np.ndarray:
    """As `between`, rising and falling over `ramp` hours."""
    return np.clip((hours - begin) / ramp, 0, 1) - np.clip((hours - begin - length) / ramp, 0, 1)


def pulses(rng: np.random.Generator, hours: np.ndarray, *, per_day: float, mean_hours: float) -> np.ndarray:
    """How many of many small users draw at a time: Poisson arrivals, exponential lengths, sizes about one."""
    drawn, edges = np.zeros(hours.size + 1), hours.ravel()
    for begin in rng.uniform(0, edges[-1], rng.poisson(per_day * edges[-1] / 24)):
        size = rng.uniform(0.5, 1.5)
        first, last = np.searchsorted(edges, [begin, begin + rng.exponential(mean_hours)])
        drawn[first] += size
        drawn[last] -= size
    return np.cumsum(drawn[:-1]).reshape(hours.shape)


def drift(rng: np.random.Generator, count: int, time_constant: float, step: float) -> np.ndarray:
    """First-order noise of unit deviation with a time constant [s] on the fine clock, shape (count / FINE, FINE)."""
    keep = math.exp(-step / time_constant)
    values, shocks = np.empty(count), rng.normal(0, math.sqrt(1 - keep**2), count)
    now = rng.normal()
    for k, shock in enumerate(shocks.tolist()):
        now = keep * now + shock
        values[k] = now
    return values.reshape(-1, FINE)
