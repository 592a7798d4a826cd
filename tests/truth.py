"""One loop whose truth is known, as a log on disk: a canal pool with setpoint moves."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np

from auditor.controllers.pid import Pid
from auditor.synthetic import Simulation, Truth, chain, drift, fine_times, send_on_delta, simulate

PERIOD = 60.0
PID = Pid(gain=150.0, integral_time=3000.0, integral="backward", low=0.0, high=100.0)

TOML = """
[loop]
name = "truth"
period = "60s"

[log]
path = "truth.csv"
time = "time"

[signals]
measurement = {{ column = "level", unit = "m" }}
setpoint = {{ column = "target", unit = "m" }}
actuator = {{ column = "gate", unit = "%", low = 0, high = 100 }}

[controller]
kind = "pid"
gain = 150.0
integral_time = "3000s"

[limits]
low = 1.7
high = 2.3
band = 0.06
max_silence = "2h"

[accept]
max_rms_error = {max_rms}
min_hours = 24
{more}
"""


@dataclass(frozen=True)
class Scene:
    """A plant and everything that happened to it."""

    plant: Truth
    setpoint: np.ndarray
    load: np.ndarray
    noise: np.ndarray

    def run(self, decide=None) -> Simulation:
        return simulate(self.plant, PID, self.setpoint, self.load, self.noise, period=PERIOD, decide=decide)

    def send_on_delta(self, delta: float) -> Simulation:
        return self.run(send_on_delta(delta, longest=120))


def scene(n: int = 9000, seed: int = 3) -> Scene:
    """Two lags and a dead time of 6.4 min; three setpoint moves; a slow random load; 2 mm of noise."""
    rng = np.random.default_rng(seed)
    plant = chain([3600.0, 300.0], gain=0.02, delay_s=384.0).resting(2.0, 40.0)
    times = fine_times(n, PERIOD, 2)
    setpoint = np.full(n, 2.0)
    for k, level in ((n // 6, 2.05), (n // 3, 1.98), (n // 2, 2.03), (2 * n // 3, 2.0)):
        setpoint[k:] = level
    return Scene(plant, setpoint, 3.0 * drift(rng, times, 15_000.0), rng.normal(0, 0.002, n))


def write_log(folder: Path, run: Simulation, *, max_rms: float = 0.02, more: str = "") -> Path:
    """Write the record of a run as CSV with its loop file; return the loop file."""
    start = datetime(2026, 3, 2, tzinfo=UTC)
    rows = ["time,level,target,gate"]
    for k, (y, r, u) in enumerate(zip(run.y.tolist(), run.r.tolist(), run.u.tolist(), strict=True)):
        rows.append(f"{(start + timedelta(seconds=PERIOD * k)).isoformat()},{y!r},{r!r},{u!r}")
    (folder / "truth.csv").write_text("\n".join(rows) + "\n")
    path = folder / "truth.toml"
    path.write_text(TOML.format(max_rms=max_rms, more=more))
    return path
