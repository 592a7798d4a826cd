"""Findings on exports of real archives whose faults are known: labelled, counted, or plain to see. See `archives`."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from auditor.logs.findings.interpolated import on_lines
from auditor.logs.findings.stale_hold import stale_runs
from auditor.logs.findings.stuck import stuck_runs
from auditor.logs.reader import read_log
from auditor.loopfile import read_loop
from tests.outside.archives import TURBINES, labelled, loop_of, plant, told, turbine, within

pytestmark = pytest.mark.outside

HOUR = 3_600_000_000_000


def precision_and_recall(found: np.ndarray, labels: np.ndarray) -> tuple[float, float]:
    both = int(np.sum(found & labels))
    return both / max(1, int(found.sum())), both / int(labels.sum())


def test_labelled_interpolated_points(tmp_path: Path) -> None:
    log, values, labels = labelled("interpolated", tmp_path)
    assert labels.sum() == 1254
    found = on_lines(values, None)
    # 68 of the labelled points lie on the level line at nought that every night is: nothing tells them from it.
    precision, recall = precision_and_recall(found, labels)
    assert precision == 1.0
    assert recall == pytest.approx(0.945, abs=0.001)
    assert precision_and_recall(found, labels & (values > 0))[1] >= 0.999
    _, findings = told(loop_of(log, "timestamp", "15min", "value_normalized", "valve"))
    assert findings["interpolated", "value_normalized"].count == found.sum()


def test_labelled_stale_points(tmp_path: Path) -> None:
    log, values, labels = labelled("stale", tmp_path)
    there = np.isfinite(values)
    assert (labels.sum(), labels[there].sum()) == (245, 245)
    found = within(*stuck_runs(values[there]), int(there.sum()))
    assert precision_and_recall(found, labels[there]) == (1.0, 1.0), "the nights at nought are no fault"
    assert len(stale_runs(values[there])[0]) == 0, "each of the three is long enough to be stuck"
    _, findings = told(loop_of(log, "timestamp", "15min", "value_normalized", "valve"))
    assert findings["stuck", "value_normalized"].count == 3
    assert ("stale-hold", "value_normalized") not in findings


def test_words_in_number_columns_are_told(tmp_path: Path) -> None:
    more = "disturbances = [{ column = 'tag34' }, { column = 'tag70' }, { column = 'tag72' }]"
    loop = read_loop(loop_of(plant(tmp_path), "", "5min", "tag2", "tag36", more))
    log = read_log(loop)
    states = {finding.signal: finding for finding in log.findings if finding.kind == "text-state"}
    counts = {column: (finding.count, finding.detail) for column, finding in states.items()}
    assert {column: count for column, (count, _) in counts.items()} == {
        "tag2": 156,
        "tag34": 14,
        "tag36": 1,
        "tag70": 326,
        "tag72": 1,
    }
    assert sum(count for count, _ in counts.values()) == 156 + 340 + 2
    words = {"tag2": "Inp OutRange", "tag34": "Bad", "tag36": "Scan Timeout", "tag70": "Bad", "tag72": "Scan Timeout"}
    for column, word in words.items():
        assert word in counts[column][1]
        assert np.sum(log.texts[column] == word) == counts[column][0], "kept as text, cell by cell"
        assert np.isnan(log.channels[column][log.texts[column] == word]).all()


@pytest.mark.parametrize("name", TURBINES)
def test_a_clock_that_was_changed_twice_a_year(name: str, tmp_path: Path) -> None:
    log, rows = turbine(name, tmp_path)
    record, findings = told(loop_of(log, "Date_time", "10min", "Ot_avg", "P_avg"))
    assert len(rows) == 105_120
    stamps = pd.to_datetime(rows["Date_time"], utc=True)
    assert stamps[stamps.duplicated()].nunique() == 12
    for column, others in (("P_avg", 0), ("Ot_avg", 1)):
        twice = findings["duplicate", column]
        assert 12 - others <= twice.count <= 12, "two temperatures of one stamp may be equal"
        assert twice.count == np.sum(rows.groupby(stamps.to_numpy())[column].nunique() > 1)
        assert "repeats an hour" in twice.detail
    gap = findings["gap", ""]
    assert gap.count == 2
    assert np.sum(record.cause == 1) == 12, "70 min from row to row are six instants without one, twice"
    assert gap.end - gap.start == 364 * 24 * HOUR + 50 * HOUR // 60, "the last Sundays of two Octobers"


def test_a_temperature_below_all_cold_is_no_value(tmp_path: Path) -> None:
    counts = {}
    for name in TURBINES:
        log, rows = turbine(name, tmp_path)
        record, findings = told(loop_of(log, "Date_time", "10min", "Ot_avg", "P_avg"))
        taken = findings.get(("sentinel", "Ot_avg"))
        counts[name] = taken.count if taken else 0
        assert counts[name] == np.sum(rows["Ot_avg"] < -100)
        assert np.nanmin(record.y) > -100
    assert counts == {"R80711": 0, "R80721": 33, "R80736": 0, "R80790": 0}


def test_a_nacelle_that_turns_past_north_wraps(tmp_path: Path) -> None:
    log, rows = turbine("R80711", tmp_path)
    _, findings = told(loop_of(log, "Date_time", "10min", "Ya_avg", "P_avg"))
    wrap = findings["range-wrap", "Ya_avg"]
    assert "range of 360 and" in wrap.detail
    angle = rows.sort_values("Date_time")["Ya_avg"].to_numpy()
    jumps = np.sum(np.abs(np.diff(angle[np.isfinite(angle)])) > 0.9 * 360)
    # The export's order differs from that of time in the repeated hours, and a hole is no wrap.
    assert wrap.count == pytest.approx(jumps, rel=0.02)
