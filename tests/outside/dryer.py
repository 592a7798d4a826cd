"""An industrial vacuum dryer: 71 batches measured in a plant, as one log with a pause between batches.

S. García-Muñoz, "Batch process improvement using latent variable methods", PhD thesis, McMaster University, 2004. The
names of its columns mislead: "JacketTemperatureSP" is what the inner controller sends to the jacket's valves (0…100,
at 0 and 100 for long), "DryerTemperatureSP" is the setpoint that the jacket's temperature follows, and "DryerTemp" is
the outer loop's measurement. Rows are numbered from 0 in each batch; one a minute is assumed. No licence is stated for
the data, so that it is downloaded by each who tests and never kept here.
"""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from pathlib import Path

import pandas as pd

from tests.outside.fetch import Member, fetch

FILE = Member(
    "process-improve",
    "2.2.0",
    "process_improve/datasets/batch/dryer.csv",
    "72822d9f6a9042353cb240fb8cc5bd7083ec874244a822eb64419f343d0ac7aa",
)
PAUSE = 60  # rows left out between two batches
FIRST_ROW = datetime(2000, 1, 1, tzinfo=UTC)


def batches() -> list[pd.DataFrame]:
    """Return the batches in order."""
    return [batch for _, batch in pd.read_csv(fetch(FILE)).groupby("batch_id", sort=True)]


def write_log(folder: Path) -> Path:
    """Write all batches on one time axis."""
    parts, begins = [], 0
    for batch in batches():
        minutes = begins + batch["ClockTime"].to_numpy()
        stamps = [(FIRST_ROW + timedelta(minutes=int(minute))).isoformat() for minute in minutes]
        parts.append(batch.assign(time=stamps))
        begins = int(minutes[-1]) + 1 + PAUSE
    path = folder / "dryer.csv"
    pd.concat(parts).to_csv(path, index=False)
    return path


def write_loop(log: Path, measurement: str, actuator: str, limits: tuple[float, float], more: str = "") -> Path:
    """Write the loop file of `measurement` ← `actuator`; both loops follow the same setpoint."""
    path = log.with_name(f"{measurement}-{actuator}.toml")
    path.write_text(
        f"""
        [loop]
        name = "{path.stem}"
        period = "1min"
        [log]
        path = "{log.name}"
        [signals]
        measurement = {{ column = "{measurement}", unit = "degC" }}
        setpoint = {{ column = "DryerTemperatureSP", unit = "degC" }}
        actuator = {{ column = "{actuator}", low = {limits[0]}, high = {limits[1]} }}
        {more}
        """
    )
    return path
