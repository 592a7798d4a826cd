"""Wide logs in which signals have time columns of their own."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from written_logs import pool_loop

from auditor.errors import LogError
from auditor.logs.align import align
from auditor.logs.reader import read_log
from auditor.loop import Loop, Mode

ROWS = 300
HEADER = "t1,level,t2,gate,t3,mode\n"


def loop_of(folder: Path, gate: str = "t2", mode: str | None = None) -> Loop:
    loop = pool_loop(folder, time="t1")
    actuator = replace(loop.signals.actuator, time=gate)
    automatic = Mode(column="mode", automatic=("AUTO",), time=mode) if mode else None
    return replace(loop, signals=replace(loop.signals, actuator=actuator, mode=automatic))


def stamp(second: float) -> str:
    return f"2025-01-01T{int(second) // 3600:02}:{int(second) // 60 % 60:02}:{second % 60:06.3f}Z"


def write(folder: Path, late: float = 0.040) -> None:
    """The level each minute, the gate a little later and for fewer minutes, the mode on change only."""
    rows = []
    for k in range(ROWS):
        gate = f"{stamp(60 * k + late)},{k % 17}" if k < ROWS - 20 else ","
        mode = f"{stamp(6000 * k)},{'AUTO' if k != 1 else 'MAN'}" if k < 3 else ","
        rows.append(f"{stamp(60 * k)},{k % 11},{gate},{mode}")
    (folder / "log.csv").write_text(HEADER + "\n".join(rows) + "\n")


def test_each_signal_keeps_its_stamps(tmp_path: Path) -> None:
    write(tmp_path)
    log = read_log(loop_of(tmp_path, mode="t3"))
    assert len(log.time) == ROWS + (ROWS - 20)
    assert (np.diff(log.time) > 0).all()
    for name, count in (("level", ROWS), ("gate", ROWS - 20), ("mode", 3)):
        assert int(log.own[name].sum()) == count
    np.testing.assert_array_equal(log.channels["gate"][log.own["gate"]], np.arange(ROWS - 20) % 17)
    assert log.texts["mode"][log.own["mode"]].tolist() == ["AUTO", "MAN", "AUTO"]


@pytest.mark.parametrize("late", [0.0, 0.040, 2.5, -20.0 + 60.0])
def test_signals_line_up_on_the_loops_clock(tmp_path: Path, late: float) -> None:
    write(tmp_path, late)
    loop = loop_of(tmp_path)
    record = align(read_log(loop), loop)
    # A row up to a quarter of a period behind an instant belongs to it, a later one to the next.
    shift = 1 if late > 15 else 0
    both = np.arange(shift, ROWS - 20)
    np.testing.assert_array_equal(record.y[both], both % 11)
    np.testing.assert_array_equal(record.u[both], (both - shift) % 17)


def test_modes_are_held_between_their_own_rows(tmp_path: Path) -> None:
    write(tmp_path)
    loop = loop_of(tmp_path, mode="t3")
    record = align(read_log(loop), loop)
    manual = np.flatnonzero(record.cause == 2)
    assert (manual[0], manual[-1], len(manual)) == (100, 199, 100)


def test_a_time_column_that_is_not_there_is_named_with_its_key(tmp_path: Path) -> None:
    write(tmp_path)
    with pytest.raises(LogError) as raised:
        read_log(loop_of(tmp_path, gate="t9"))
    (problem,) = raised.value.problems
    assert "signals.actuator.time" in problem.expected
    assert problem.what == 'The log has no column "t9".'
