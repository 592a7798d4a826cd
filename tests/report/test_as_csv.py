from __future__ import annotations

import io

import pandas as pd
import pytest

from auditor.audit import Audit
from auditor.report.as_csv import cell, flags_csv, replays_csv, replays_frame
from tests.report import fake_audit


def test_replays_come_back_bit_for_bit(audit: Audit) -> None:
    table = pd.read_csv(io.StringIO(replays_csv(audit)), dtype=str, keep_default_na=False)
    # Read as texts: a reader's own rounding is not at stake here.
    assert [int(text) for text in table["replay"]] == list(range(len(audit.replays)))
    assert [float(text) for text in table["rms_error"]] == [r.measures.rms_error for r in audit.replays]
    assert [float(text) for text in table["rms_error_high90"]] == [r.interval90["rms_error"][1] for r in audit.replays]
    assert [float(text) for text in table["rest_updates"]] == [r.rest.updates for r in audit.replays]
    assert [text == "true" for text in table["answerable"]] == [r.answerable for r in audit.replays]
    deltas = [float(text) for text in table["setting_delta"] if text]
    assert deltas == [r.setting.values["delta"] for r in audit.replays if "delta" in r.setting.values]


def test_the_frame_and_the_file_have_the_same_columns(audit: Audit) -> None:
    table = pd.read_csv(io.StringIO(replays_csv(audit)))
    assert list(table.columns) == list(replays_frame(audit).columns)
    assert len(table) == len(replays_frame(audit))


def test_all_flags_are_written(audit: Audit) -> None:
    table = pd.read_csv(io.StringIO(flags_csv(audit)), parse_dates=["start", "end"])
    assert len(table) == len(audit.flags)
    # Older versions of the reading library miss the last bit.
    assert list(table["share"]) == pytest.approx([flag.values["share"] for flag in audit.flags], rel=1e-15)
    lengths = (table["end"] - table["start"]).dt.total_seconds() / fake_audit.PERIOD + 1
    assert list(lengths) == [flag.stop - flag.start for flag in audit.flags]


def test_an_audit_without_replays_has_tables_with_headers(audit: Audit) -> None:
    bare = fake_audit.without_model(audit)
    assert pd.read_csv(io.StringIO(replays_csv(bare))).empty
    table = pd.read_csv(io.StringIO(flags_csv(bare)))
    assert table.empty
    assert "severity" in table.columns


@pytest.mark.parametrize(
    ("value", "text"),
    [
        ("=1+1", "'=1+1"),
        ("+cmd", "'+cmd"),
        ("-1 m", "'-1 m"),
        ("@sum", "'@sum"),
        ("\t=1", "'\t=1"),
        ("  =1", "'  =1"),
        ("plain", "plain"),
        (-1.5, "-1.5"),
        (float("nan"), ""),
        (None, ""),
        (True, "true"),
        (7, "7"),
    ],
)
def test_no_text_is_run_as_a_formula(value: object, text: str) -> None:
    assert cell(value) == text


def test_hostile_names_stay_text(audit: Audit) -> None:
    evil = fake_audit.hostile(audit)
    rules = pd.read_csv(io.StringIO(replays_csv(evil)))["rule"]
    assert rules[0] == "'+cmd|' /C calc'!A0"
    assert all(text.startswith("'=1+1") for text in pd.read_csv(io.StringIO(flags_csv(evil)))["detail"])
