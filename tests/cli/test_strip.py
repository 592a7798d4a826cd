"""The time strip of `auditor check`: characters, ends, causes; and what may be asked of a log."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from auditor.cli.app import run
from auditor.cli.strip import COLUMNS, PARTLY, UNUSABLE, USABLE, Stretch, stretches, time_strip
from auditor.cli.summary import asked_of_log, findings_table
from auditor.logs.findings.base import Finding
from auditor.logs.record import CAUSES, Record
from auditor.logs.spans import SHORTEST, spans_of
from auditor.loopfile import read_loop
from tests.truth import scene, write_log

START = 1_743_292_800_000_000_000  # 2025-03-30T00:00:00Z: Lisbon puts its clocks forward an hour later


def record(
    n: int = 720, cuts: tuple[tuple[str, int, int], ...] = (), zone: str = "UTC", period: float = 60.0
) -> Record:
    """A record whose samples a…b−1 are unusable for each (cause, a, b)."""
    cause = np.zeros(n, dtype=np.int8)
    for name, a, b in cuts:
        cause[a:b] = CAUSES.index(name)
    values = np.zeros(n)
    return Record(
        period=period, start=START, y=values, r=values, u=values, w=np.zeros((0, n)), valid=cause == 0, cause=cause,
        spans=spans_of(cause == 0, 2, SHORTEST, cause == CAUSES.index("manual")), zone=zone,
    )  # fmt: skip


def bar(of: Record) -> str:
    return time_strip(of).splitlines()[0]


def test_a_whole_record_is_one_bar_and_no_cause() -> None:
    lines = time_strip(record()).splitlines()
    assert lines[0] == USABLE * COLUMNS
    assert lines[-1] == f"{USABLE} usable"


def test_every_character_is_a_72nd_and_a_short_stretch_still_shows() -> None:
    cut = record(cuts=(("gap", 100, 120), ("manual", 335, 336)))
    assert bar(cut) == USABLE * 10 + UNUSABLE * 2 + USABLE * 21 + PARTLY + USABLE * 38


def test_a_short_record_has_a_character_per_sample() -> None:
    cut = record(n=60, cuts=(("gap", 55, 60),))
    assert bar(cut) == USABLE * 55 + UNUSABLE * 5


def test_ends_are_on_the_logs_own_clock_and_under_the_ends_of_the_strip() -> None:
    lines = time_strip(record(zone="Europe/Lisbon")).splitlines()
    # 12 h of samples from midnight; the clock jumps at 01:00, so that the last sample reads 12:59.
    assert lines[1].startswith("2025-03-30 00:00 ")
    assert lines[1].endswith(" 2025-03-30 12:59")
    assert len(lines[1]) == COLUMNS
    assert "Europe/Lisbon" in lines[2]


def test_causes_come_by_what_they_take_with_their_longest_stretches() -> None:
    gaps = (("gap", 60, 63), ("gap", 120, 130), ("gap", 250, 256))
    told = time_strip(record(cuts=(*gaps, ("manual", 400, 460)))).splitlines()
    heads = [line for line in told if "stretch" in line]
    assert heads[0] == "manual: 1 stretch, 1 h (8.3 %)"
    assert heads[1] == "gap: 3 stretches, 19 min (2.6 %); the longest:"
    at = told.index(heads[1])
    assert told[at + 1] == "  2025-03-30 02:00 to 2025-03-30 02:09, 10 min"
    assert told[at + 2] == "  2025-03-30 04:10 to 2025-03-30 04:15, 6 min"
    assert len(told) == at + 3


def test_what_lies_between_two_holes_is_a_short_span() -> None:
    cut = record(cuts=(("gap", 300, 310), ("gap", 340, 350)))
    assert [(s.cause, s.start, s.stop) for s in stretches(cut)] == [
        ("gap", 300, 310),
        ("short span", 310, 340),
        ("gap", 340, 350),
    ]


def test_bridged_holes_are_usable_and_stretches_add_up_to_what_is_outside_the_spans() -> None:
    cut = record(cuts=(("gap", 300, 302), ("bad value", 500, 520)))
    assert [s.cause for s in stretches(cut)] == ["bad value"]
    assert sum(len(s) for s in stretches(cut)) == int((~cut.in_span).sum())


def test_without_recorded_causes_what_is_not_valid_is_a_gap() -> None:
    cut = replace(record(cuts=(("manual", 300, 400),)), cause=None)
    (one,) = stretches(cut)
    assert one == Stretch("gap", 300, 400)


def test_a_record_without_any_span_is_drawn() -> None:
    nothing = record(n=100, cuts=(("gap", 0, 100),))
    assert bar(nothing) == UNUSABLE * COLUMNS
    assert "gap: 1 stretch, 1.67 h (100.0 %)" in time_strip(nothing)


def finding(kind: str, weight: str, count: int = 1) -> Finding:
    return Finding(kind=kind, start=None, end=None, count=count, detail="seen", effect="none", weight=weight)


def test_findings_come_by_weight() -> None:
    found = (finding("first", "note"), finding("second", "stops the answer"), finding("third", "limits the answer"))
    shown = findings_table(replace(record(), findings=found))
    places = [shown.index(kind) for kind in ("second", "third", "first")]
    assert places == sorted(places)


def test_what_may_be_asked_is_told_with_its_reason(tmp_path: Path) -> None:
    loop = read_loop(write_log(tmp_path, scene(n=400).run()))
    rounded = asked_of_log(replace(record(), y_quantum=0.01), loop)
    assert "0.0300 m" in rounded
    assert "three steps" in rounded
    archived = asked_of_log(replace(record(), y_quantum=0.01, y_deadband=0.02), loop)
    assert "0.0800 m" in archived
    assert "dead-bands" in archived
    slow = asked_of_log(replace(record(), log_step=300.0), loop)
    assert "25 min" in slow
    assert "five" in slow
    assert "1 min" in asked_of_log(record(), loop)


def test_check_prints_the_strip_without_colour(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = write_log(tmp_path, scene(n=2000).run())
    log = tmp_path / "truth.csv"
    rows = log.read_text().splitlines()
    log.write_text("\n".join(rows[:900] + rows[1000:]) + "\n")
    assert run(["check", str(path)]) == 0
    shown = capsys.readouterr().out
    assert "\x1b" not in shown
    strip = next(line for line in shown.splitlines() if line.startswith(USABLE * 10))
    assert len(strip) == COLUMNS
    assert UNUSABLE in strip
    assert "gap: 1 stretch, 1.67 h" in shown
    assert max(map(len, shown.splitlines())) <= 80
