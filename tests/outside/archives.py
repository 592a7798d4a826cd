"""Exports of real archives with known faults, as logs on disk: labelled series, text states, a clock with two seasons.

- Power of an inverter every 15 min, with stale and interpolated points labelled by the keepers of the package
  pvanalytics 0.2.2 (MIT licence).
- An anonymised export of a plant's archive every 5 min, with words where the archive had no number; package
  bibmon 1.2.0 (Apache-2.0 licence).
- Four wind turbines over 2014 and 2015 every 10 min (the wind farm La Haute Borne); package openoa 3.2. No licence is
  stated for the data, so that it is downloaded by each who tests and never kept here.

None is the log of a loop: one column is taken for the measurement, another one for the actuator.
"""

from __future__ import annotations

import io
import zipfile
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd

from auditor.arrays import BoolArray, FloatArray
from auditor.logs.align import read_record
from auditor.logs.findings.base import Finding
from auditor.logs.record import Record
from auditor.loopfile import read_loop
from tests.outside.fetch import Member, fetch

LABELLED = {
    "stale": "19f4a0effd77f28d4f5c9c5147c05870f72681eab55aeda48fb37bde9d815472",
    "interpolated": "67e615812ba700185bd01d92dd52f35a6cdaf08d61a203f69d6b281e53a80e52",
}
PLANT = Member(
    "bibmon",
    "1.2.0",
    "bibmon/real_process_data/real_process_data.csv",
    "d360b9e7e0d9e1f7f824e9f0c4f7817c0205eaf3ada3089a4521bb57c30fa308",
)
WIND_FARM = Member(
    "openoa",
    "3.2",
    "examples/data/la_haute_borne.zip",
    "be5ea66a3355286e491f5618250dc83e85252a8cb337748d7ba19edc50df6138",
    source=True,
)
TURBINES = ("R80711", "R80721", "R80736", "R80790")


def labelled(kind: str, folder: Path) -> tuple[Path, FloatArray, BoolArray]:
    """Write a labelled series with an actuator that moves; return the file, its values (some NaN) and its labels."""
    name = f"ac_power_inv_2173_{kind}_data.csv"
    table = pd.read_csv(fetch(Member("pvanalytics", "0.2.2", f"pvanalytics/data/{name}", LABELLED[kind])))
    table.assign(valve=np.arange(len(table)) % 7).to_csv(folder / name, index=False)
    return folder / name, table["value_normalized"].to_numpy(), table[f"{kind}_data_mask"].to_numpy()


def plant(folder: Path) -> Path:
    """Copy the plant's export, so that a loop file can stand beside it."""
    path = folder / "plant.csv"
    path.write_bytes(fetch(PLANT).read_bytes())
    return path


@cache
def _turbines() -> dict[str, pd.DataFrame]:
    with zipfile.ZipFile(fetch(WIND_FARM)) as opened:
        table = pd.read_csv(io.BytesIO(opened.read("la-haute-borne-data-2014-2015.csv")))
    return {str(name): rows for name, rows in table.groupby("Wind_turbine_name", sort=True)}


def turbine(name: str, folder: Path) -> tuple[Path, pd.DataFrame]:
    """Write the rows of one turbine, in the order of the export."""
    path = folder / f"{name}.csv"
    rows = _turbines()[name]
    rows.to_csv(path, index=False)
    return path, rows


def loop_of(log: Path, time: str, period: str, measurement: str, actuator: str, more: str = "") -> Path:
    """Write a loop file beside the log, with a setpoint of 0."""
    path = log.with_name(f"{measurement}.toml")
    path.write_text(
        f"""
        [loop]
        name = "archive"
        period = "{period}"
        [log]
        path = "{log.name}"
        time = "{time}"
        timezone = "UTC"
        [signals]
        measurement = {{ column = "{measurement}" }}
        setpoint = {{ value = 0 }}
        actuator = {{ column = "{actuator}" }}
        {more}
        """
    )
    return path


def told(loop: Path) -> tuple[Record, dict[tuple[str, str], Finding]]:
    """Return the record and its findings by kind and signal."""
    record = read_record(read_loop(loop))
    return record, {(finding.kind, finding.signal): finding for finding in record.findings}


def within(first: np.ndarray, last: np.ndarray, size: int) -> BoolArray:
    """Return True from each first to its last index."""
    mask = np.zeros(size, dtype=np.bool_)
    for start, stop in zip(first, last, strict=True):
        mask[start : stop + 1] = True
    return mask
