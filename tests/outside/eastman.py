"""Closed-loop logs of the Tennessee Eastman process, as a log file and loop files.

A simulated benchmark with published controllers: J. J. Downs and E. F. Vogel, "A plant-wide industrial process control
problem", Computers & Chemical Engineering 17 (1993) 245; logs of E. L. Russell, L. H. Chiang and R. D. Braatz, 2000.
A row every 3 min: measurements XMEAS(1…41), then actuators XMV(1…11). The files `dNN_te` hold 48 h in rows, the fault
of that number from the eighth hour on; `d00` holds 25 h without fault, written in columns.

The controllers ran every few seconds, so that a row of the log is one of 60 or more of their steps.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np

from auditor.arrays import FloatArray
from tests.outside.fetch import Member, fetch

COLUMNS = (*(f"XMEAS({i})" for i in range(1, 42)), *(f"XMV({i})" for i in range(1, 12)))

FIRST_ROW = datetime(2000, 1, 1, tzinfo=UTC)
STEP = timedelta(minutes=3)

RUNS = tuple(f"d{fault:02d}_te" for fault in range(22))

SETPOINTS = {1: 0.25052, 4: 9.3477, 9: 120.40, 12: 50.0, 15: 50.0, 18: 65.731, 19: 230.31, 21: 94.599}
"""Nominal values of the published base case; those of inner loops moved and were not logged."""

SHA256 = {
    "d00": "4c3c0b11eefacf93e5d2529e2866d7a625e37aa9153d0f95fae17a6c9e560deb",
    "d00_te": "57d56da4199e3d73582855d810be1d13d931386fd728bf1694798c7b0a03678c",
    "d01_te": "e7e6992fb39664e739fccbc001a1c5d5f7cb21829544f734ca3f282c26f680e5",
    "d02_te": "a34bd9c3693fa96bd3ee533fb7fbe29a9d226a4e3250b585ef1308e1136dbfb0",
    "d03_te": "b7bf6f2ed7cff0a5577898b009edd252b9bdf6ee9ff7dbeacf9af9aa4c6abace",
    "d04_te": "1ccb488dd5feac11aad54623451168abef066229e685872597897800363916f9",
    "d05_te": "1def7258a2865aeead699d52c8cf926fbf34c1467aaf298121987ab858fd0888",
    "d06_te": "8a3adc7121eaa9b9300c27f9c57a8ab356315401cb964310a4a8244dd34bf79d",
    "d07_te": "e01b7c81daf9fccc4495cbde5658296918276b3c078044893f6e945dd91d3446",
    "d08_te": "c0637f02f23b79890b43cfee9604818ad6d7f81532223d76acf1da0d6e2a2cc1",
    "d09_te": "513df6c3a4fd48e0eaddb0002cd8cdab3a78a5c83c47883bb52d2dc6c2472428",
    "d10_te": "3a278be79d8d111fc60be3cfb4f961c28e2dc632f17eb519886aa0f95864ffc6",
    "d11_te": "6d60a4c932d918e1ab26ae5d16320936a665f3aad3f05482d23f5c4550b9f29a",
    "d12_te": "2180fcecb01d1b110b429ba2969d6b18dcc625599e3640e54f69afa32dccbe50",
    "d13_te": "2e34e0c427d6e41d77d6cae76550b7e95004f9f13bc093278ecf5c282a1c9f03",
    "d14_te": "e8976d056c0769cebbcec3bcba89d2468040ccae7acbea55ebc3b2e56b217396",
    "d15_te": "a7242b956837bec8ca7f224d01805247f2aea6ea868eaa064e068b5c0761b1e5",
    "d16_te": "8381d7371aac49b498e7bf93149b77a0a6bbeffe73520881dcbe8ae96277244d",
    "d17_te": "27d2d72052064e3cbb7a45df8073f15bb83b77403f532616e73c8869b043e7c9",
    "d18_te": "1db5b93a7daa58ed1b641845b58ad818546ced7f3de866c086da18a7ebef5041",
    "d19_te": "c24dd77f787f89347273addc8a453d79f0b99edd64d43be11a5e0907bd515c5f",
    "d20_te": "e54035eda95311f13dd095f87607d97a89b7541afa2a3f68af098f33a5e2e6e5",
    "d21_te": "b6823aa09638cd59cb168bc24f991b6d4d557d8aea62b0b2a87ee67c21ba5a83",
}


def rows_of(run: str) -> FloatArray:
    """Return one run, shape (rows, 52)."""
    path = f"bibmon/tennessee_eastman/{run}.dat"
    table = np.loadtxt(fetch(Member("bibmon", "1.2.0", path, SHA256[run])))
    return table if table.shape[1] == len(COLUMNS) else table.T


@dataclass(frozen=True)
class Eastman:
    """Writes logs and loop files into one folder."""

    folder: Path
    written: set[str] = field(default_factory=set)

    def loop(self, run: str, measured: int, actuator: int, *, first: int = 0, more: str = "") -> Path:
        """Write the loop file of XMEAS(`measured`) ← XMV(`actuator`) and, once, the log from row `first` on."""
        name = f"{run}-from-{first}"
        if name not in self.written:
            self._write_log(run, name, first)
        path = self.folder / f"{name}-{measured}-{actuator}.toml"
        path.write_text(
            f"""
            [loop]
            name = "{path.stem}"
            period = "3min"
            [log]
            path = "{name}.csv"
            [signals]
            measurement = {{ column = "XMEAS({measured})" }}
            setpoint = {{ value = {SETPOINTS[measured]:.6f} }}
            actuator = {{ column = "XMV({actuator})", unit = "%", low = 0, high = 100 }}
            {more}
            """
        )
        return path

    def _write_log(self, run: str, name: str, first: int) -> None:
        table = rows_of(run)
        lines = [",".join(("time", *COLUMNS))]
        for row in range(first, len(table)):
            stamp = (FIRST_ROW + row * STEP).isoformat()
            lines.append(",".join((stamp, *(repr(float(value)) for value in table[row]))))
        (self.folder / f"{name}.csv").write_text("\n".join(lines) + "\n")
        self.written.add(name)


def controller(gain: float, integral_time: str) -> str:
    """Return the table that states a controller."""
    return f'[controller]\n            gain = {gain}\n            integral_time = "{integral_time}"'
