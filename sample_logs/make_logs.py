"""Make the four sample logs: ``python sample_logs/make_logs.py [--out DIR]``.

Places, companies and numbers are invented. Each log comes from a loop whose truth is known: the load is drawn on a
quarter of the base period and the plant solved exactly in between. README.md says what is in the files.
"""

from __future__ import annotations

import argparse
import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from auditor.controllers import Pid
from auditor.synthetic import Decide, Simulation, Truth, between, chain, drift, fine_times, opened, pulses, simulate

PARTS = 4
"""Parts of a base period on which the load is drawn."""


@dataclass(frozen=True, eq=False, slots=True, kw_only=True)
class Scenario:
    """One loop with all that acts on it, so that it can be run again under another update rule.

    Attributes
    ----------
    truth, controller : the loop
    period : float
        Base period [s].
    setpoint, noise : ndarray, shape (N,)
    load : ndarray, shape (N, PARTS)
    y_step, u_step : float
        Resolution of the measurement and of the actuator's position.
    start : str
        First stamp; `zone` is the clock it is on.
    manual : ndarray, shape (N,), or None
        Position asked for by hand, NaN where the controller runs.
    aside : ndarray, shape (N,), or None
        A column that is logged but takes no part in the loop.
    """

    truth: Truth
    controller: Pid
    period: float
    setpoint: np.ndarray
    load: np.ndarray
    noise: np.ndarray
    y_step: float
    u_step: float
    start: str
    zone: str = "UTC"
    manual: np.ndarray | None = None
    aside: np.ndarray | None = None

    def run(self, decide: Decide | None = None, controller: Pid | None = None) -> Simulation:
        """Run the loop with the same load and noise under an update rule; None updates at every sample."""
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
    def automatic(self) -> np.ndarray:
        """True where the controller runs, shape (N,)."""
        return np.ones(len(self.setpoint), dtype=bool) if self.manual is None else np.isnan(self.manual)

    @property
    def stamps(self) -> pd.DatetimeIndex:
        """Time of every sample on the scenario's clock."""
        elapsed = pd.to_timedelta(np.arange(len(self.setpoint)) * round(self.period * 1000), unit="ms")
        return pd.DatetimeIndex(pd.Timestamp(self.start, tz=self.zone) + elapsed)


def canal_pool(seed: int = 1) -> Scenario:
    """Level of a canal pool: gate flow, 9.4 min of travel, a wave lag, the pool's surface; irrigators take water."""
    rng, count, period = np.random.default_rng([seed, 1]), 21 * 1440, 60.0
    hours = fine_times(count, period / 3600, PARTS)
    taken = np.zeros_like(hours)
    for flow, first, length, every in ((0.22, 6, 9, 48), (0.30, 18, 11, 72), (0.16, 5, 7, 24), (0.26, 30, 14, 96)):
        # A turnout is opened by hand, so never quite on the hour the rota says.
        for begin in np.arange(first, 21 * 24, every):
            taken += flow * between(hours, begin + rng.normal(0, 0.3), length + rng.normal(0, 0.5))
    taken += 0.09 * pulses(rng, hours, every=9.6, length=2.0)
    passed_on = 0.08 * np.sin(2 * np.pi * (hours - 9.0) / 24) + 0.03 * drift(rng, hours, 3.0)
    # A gate inspection: held by hand, opened further half way, then given back.
    manual = np.full(count, np.nan)
    manual[15 * 1440 + 560 : 15 * 1440 + 600] = 44.0
    manual[15 * 1440 + 600 : 15 * 1440 + 635] = 51.0
    per_flow = 1.0 / 11_000.0
    pool = chain((180.0, math.inf, 30.0), gain=per_flow, delay_s=564.0, load_stage=1, load_gain=-per_flow)
    return Scenario(
        truth=pool.resting(2.10, 46.0, lambda opening: 4.0 * (max(opening, 0.0) / 100) ** 0.9),
        controller=Pid(gain=150.0, integral_time=5400.0, integral="forward", low=0.0, high=100.0, max_rate=0.25),
        period=period,
        setpoint=stepped(
            count, 2.10, {3312: 2.14, 7776: 2.10, 10584: 2.06, 13824: 2.10, 17712: 2.15, 21024: 2.10, 26496: 2.07}
        ),
        load=taken - taken.mean() + passed_on,
        noise=rng.normal(0, 0.002, count),
        y_step=0.001,
        u_step=0.01,
        manual=manual,
        start="2025-06-02",
    )


def aeration(seed: int = 1) -> Scenario:
    """Dissolved oxygen of an aeration tank: air main, tank and sensor lags; two daily peaks, one wet night."""
    rng, count, period = np.random.default_rng([seed, 2]), 4 * 8640, 10.0
    hours = fine_times(count, period / 3600, PARTS)
    clock = hours % 24
    day = np.exp(-(((clock - 10) / 2.6) ** 2)) + 0.8 * np.exp(-(((clock - 20) / 2.8) ** 2))
    # Rain dilutes what comes in, but it comes in gusts.
    rain = between(hours, 49.0, 9.0) * (1 - np.exp(-(hours - 49.0).clip(0) / 1.5))
    uptake = 7.0 * (day - day.mean()) - 4.0 * rain + 5.5 * (1 + 0.8 * rain) * drift(rng, hours, 0.25)
    # While the probe is wiped the blower stays at a fixed speed.
    manual = np.full(count, np.nan)
    manual[CLEANING] = 58.0
    tank = chain((45.0, 420.0, 60.0), gain=0.105, delay_s=17.0, load_stage=1, load_gain=-0.105)
    return Scenario(
        truth=tank.resting(2.0, 55.0, lambda speed: 100.0 * (max(speed, 0.0) / 100) ** 0.8),
        controller=Pid(gain=32.0, integral_time=300.0, integral="backward", low=20.0, high=100.0),
        period=period,
        setpoint=np.full(count, 2.0),
        load=uptake,
        noise=rng.normal(0, 0.01, count),
        y_step=0.01,
        u_step=0.1,
        manual=manual,
        start="2025-03-17",
        zone="Europe/Vienna",
    )


CLEANING = slice(34 * 360, 34 * 360 + 150)
"""The probe is wiped on the second day at ten, for 25 minutes."""


def heat_station(seed: int = 1) -> Scenario:
    """Supply temperature of a heat station: pipe travel, valve, exchanger and pocket lags; hot water is drawn."""
    rng, count, period = np.random.default_rng([seed, 3]), 43_200, 2.0
    hours = fine_times(count, period / 3600, PARTS)
    drawn = pulses(rng, hours, every=24 / 70, length=0.12) + 0.6 * pulses(rng, hours, every=24 / 140, length=0.04)
    heating = 3.0 * np.exp(-(((hours - 6.8) / 1.2) ** 2)) + 2.0 * np.exp(-(((hours - 19.0) / 1.8) ** 2))
    load = 1.6 * drawn + 1.5 * heating + 0.7 * drift(rng, hours, 300.0 / 3600)
    outdoor = 1.0 + 5.0 * np.cos(2 * np.pi * (hours[:, 0] - 15.0) / 24)
    # The heating curve is worked out every quarter of an hour, in half degrees.
    setpoint = 0.5 * np.round((62.0 - 0.9 * np.repeat(outdoor[::450], 450)) / 0.5)
    exchanger = chain((6.0, 32.0, 9.0), gain=0.55, delay_s=9.0, load_stage=1, load_gain=-1.0)
    return Scenario(
        truth=exchanger.resting(float(setpoint[0]), 55.0, lambda lift: 40.0 * 1.6 ** (lift / 40.0 - 1)),
        controller=Pid(gain=3.6, integral_time=27.0, integral="backward", low=0.0, high=100.0, max_rate=1.5),
        period=period,
        setpoint=setpoint,
        load=load - load.mean(),
        noise=rng.normal(0, 0.04, count),
        y_step=0.01,
        u_step=0.5,
        start="2025-01-21",
        aside=np.round(outdoor + 0.2 * drift(rng, hours, 0.5)[:, 0], 1),
    )


def booster_pump(seed: int = 1) -> Scenario:
    """Pressure behind a booster pump: drive, mains and sensor lags; taps all the time, a hydrant drill all morning."""
    rng, count, period = np.random.default_rng([seed, 4]), 43_200, 0.5
    hours = fine_times(count, period / 3600, PARTS)
    flow = 12.0 + 0.5 * drift(rng, hours, 40.0 / 3600) + pulses(rng, hours, every=24 / 900, length=0.02)
    # The brigade opens and closes the same hydrant again and again, in about a second each time.
    for begin in np.arange(0.4, 5.8, 0.2) + rng.uniform(-0.06, 0.06, 27):
        flow += 10.0 * opened(hours, begin, rng.uniform(0.02, 0.08), 1.0 / 3600)
    loss = 0.0045 * flow**2
    mains = chain((1.0, 7.0, 0.5), delay_s=0.7, load_stage=1, load_gain=-1.0)
    return Scenario(
        truth=mains.resting(4.0, 70.0, lambda speed: 10.5 * (max(speed, 0.0) / 100) ** 2),
        controller=Pid(gain=11.0, integral_time=7.0, integral="backward", low=30.0, high=100.0),
        period=period,
        # The operator tries other pressures, every twenty minutes or so.
        setpoint=stepped(count, 4.0, dict(zip(range(2700, count, 2700), (4.2, 4.0, 4.1, 4.0, 3.9) * 3, strict=True))),
        load=loss - loss.mean(),
        noise=rng.normal(0, 0.004, count),
        y_step=0.01,
        u_step=0.01,
        start="2025-09-09T06:00",
        zone="Europe/Oslo",
        aside=np.round(flow.mean(axis=1), 1),
    )


def stepped(count: int, first: float, steps: dict[int, float]) -> np.ndarray:
    """A value that changes at the samples given, shape (count,)."""
    values = np.full(count, first)
    for sample, value in steps.items():
        values[sample:] = value
    return values


def write_canal_pool(scenario: Scenario, done: Simulation, folder: Path) -> None:
    """CSV with two outages of the radio link (the gate went on by itself) and four rows that were sent twice."""
    stamps = scenario.stamps.strftime("%Y-%m-%dT%H:%M:%SZ")
    modes = np.where(scenario.automatic, "AUTO", "MAN")
    rows = [
        f"{t},{y:.3f},{r:.2f},{u:.2f},{mode}"
        for t, y, r, u, mode in zip(stamps, done.y, done.r, done.u, modes, strict=True)
    ]
    lost = set(range(6 * 1440 + 850, 6 * 1440 + 1030)) | set(range(18 * 1440 + 130, 18 * 1440 + 265))
    twice = {2 * 1440 + 77, 9 * 1440 + 1301, 9 * 1440 + 1302, 20 * 1440 + 415}
    kept = [row for k, row in enumerate(rows) if k not in lost for row in [row] * (2 if k in twice else 1)]
    write_lines(folder / "canal-pool.csv", ["time,level,target,gate,mode", *kept])


def write_aeration(scenario: Scenario, done: Simulation, folder: Path) -> None:
    """CSV as a European control room exports it: local time, semicolons, decimal commas; probe frozen while wiped."""
    oxygen = done.y.copy()
    oxygen[CLEANING] = oxygen[CLEANING.start - 1]
    modes = np.where(scenario.automatic, "AUTO", "CLEANING")
    rows = [
        f"{t};{y:.2f};{r:.1f};{u:.1f};{mode}".replace(".", ",").replace("_", ".")
        for t, y, r, u, mode in zip(
            scenario.stamps.strftime("%d_%m_%Y %H:%M:%S"), oxygen, done.r, done.u, modes, strict=True
        )
    ]
    write_lines(folder / "aeration.csv", ["time;oxygen;setpoint;blower;mode", *rows])


def write_heat_station(scenario: Scenario, done: Simulation, folder: Path) -> None:
    """Parquet, UTC stamps in milliseconds."""
    columns = {
        "supply": np.round(done.y, 2),
        "supply_setpoint": np.round(done.r, 1),
        "valve": np.round(done.u, 1),
        "outdoor": scenario.aside,
    }
    write_parquet(folder / "heat-station.parquet", scenario.stamps, pa.timestamp("ms", tz="UTC"), columns)


def write_booster_pump(scenario: Scenario, done: Simulation, folder: Path) -> None:
    """Parquet, stamps in microseconds with their zone, mode as a number."""
    columns = {
        "pressure": np.round(done.y, 2),
        "pressure_setpoint": np.round(done.r, 2),
        "speed": np.round(done.u, 2),
        "flow": scenario.aside,
        "mode": np.ones(len(done.y), dtype=np.int8),
    }
    write_parquet(folder / "booster-pump.parquet", scenario.stamps, pa.timestamp("us", tz="Europe/Oslo"), columns)


SAMPLES: dict[str, tuple[Callable[[int], Scenario], Callable[[Scenario, Simulation, Path], None]]] = {
    "canal-pool": (canal_pool, write_canal_pool),
    "aeration": (aeration, write_aeration),
    "heat-station": (heat_station, write_heat_station),
    "booster-pump": (booster_pump, write_booster_pump),
}


def write_lines(path: Path, lines: list[str]) -> None:
    """Text with the same bytes on every system."""
    path.write_bytes(("\n".join(lines) + "\n").encode("utf-8"))


def write_parquet(path: Path, stamps: pd.DatetimeIndex, kind: pa.DataType, columns: dict[str, np.ndarray]) -> None:
    """One table, the time column first."""
    time = pa.array(stamps.tz_convert("UTC").tz_localize(None).to_numpy()).cast(pa.timestamp(kind.unit))
    table = pa.table({"time": time.cast(pa.int64()).cast(kind)} | {name: pa.array(v) for name, v in columns.items()})
    pq.write_table(table, path, compression="zstd", compression_level=9)


def main() -> None:
    """Write every log into the folder asked for."""
    parser = argparse.ArgumentParser(description="Make the sample logs again, from their seed.")
    parser.add_argument("--out", type=Path, default=Path(__file__).parent, help="folder for the logs")
    parser.add_argument("--seed", type=int, default=1, help="the bundled logs have seed 1")
    wanted = parser.parse_args()
    wanted.out.mkdir(parents=True, exist_ok=True)
    for make, write in SAMPLES.values():
        scenario = make(wanted.seed)
        write(scenario, scenario.run(), wanted.out)


if __name__ == "__main__":
    main()
