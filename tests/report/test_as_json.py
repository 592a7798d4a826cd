from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from jsonschema import Draft202012Validator

from auditor.audit import Audit
from auditor.report.as_json import MEASURES, audit_json, audit_object
from auditor.schema import audit_schema
from tests.report import fake_audit

VALIDATOR = Draft202012Validator(audit_schema())


def _empty(audit: Audit) -> Audit:
    record = replace(
        audit.record,
        **{name: np.empty(0) for name in ("y", "r", "u")},
        w=np.empty((0, 0)),
        valid=np.empty(0, dtype=bool),
        spans=(),
    )
    bare = fake_audit.without_model(audit)
    return replace(bare, record=record, counted=(), baseline=None, baseline_first=None, baseline_rest=None)


CASES: list[Callable[[Audit], Audit]] = [
    lambda audit: audit,
    fake_audit.kept,
    fake_audit.without_model,
    fake_audit.without_answers,
    fake_audit.hostile,
    _empty,
]


@pytest.mark.parametrize("case", CASES)
def test_every_audit_keeps_the_schema(audit: Audit, case: Callable[[Audit], Audit]) -> None:
    known = json.loads(audit_json(case(audit)))
    assert [error.message for error in VALIDATOR.iter_errors(known)] == []


def test_the_schema_is_a_schema_and_closed() -> None:
    Draft202012Validator.check_schema(audit_schema())
    known = {"format": "auditor/audit", "version": 1}
    missing = {error.message for error in VALIDATOR.iter_errors(known)}
    assert "'verdict' is a required property" in missing


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("verdict", "decision"), "maybe"),
        (("log", "start"), "2025-03-24 00:00"),
        (("replays", 0, "settings", "every"), [2]),
        (("replays", 0, "surprise"), 1),
        (("replays", 10, "refusal"), None),
        (("flags", 0, "values"), {}),
        (("provenance", "inputs", 0, "sha256"), "xyz"),
    ],
)
def test_the_schema_refuses_what_the_contract_does_not_say(audit: Audit, path: tuple[Any, ...], value: object) -> None:
    known = audit_object(audit)
    place = known
    for step in path[:-1]:
        place = place[step]
    place[path[-1]] = value
    assert not VALIDATOR.is_valid(known)


def test_unknown_values_are_null_and_never_nan(audit: Audit) -> None:
    assert audit.baseline is not None
    odd = replace(audit.baseline, median_gap_s=float("nan"), max_gap_s=float("inf"))
    text = audit_json(replace(audit, baseline=odd))
    assert "NaN" not in text
    assert "Infinity" not in text
    known = json.loads(text)["baseline"]
    assert known["median_gap_s"] is None
    assert known["max_gap_s"] is None


def test_numbers_keep_every_bit(audit: Audit) -> None:
    known = json.loads(audit_json(audit))
    for row, replay in zip(known["replays"], audit.replays, strict=True):
        assert row["rms_error"] == replay.measures.rms_error
        assert tuple(row["interval90"]["rms_error"]) == replay.interval90["rms_error"]
        assert row["settings"] == replay.setting.settings


def test_ends_are_the_last_sample(audit: Audit) -> None:
    known = audit_object(audit)
    assert known["log"]["start"] == "2025-03-23T23:00:00Z"
    assert known["log"]["spans"][0]["end"] == "2025-03-30T04:59:00Z"  # 8 999 minutes later
    assert known["log"]["spans"][0]["samples"] == 9_000
    flag, row = audit.flags[0], known["flags"][0]
    assert row["end"] == known_time(audit, flag.stop - 1)
    assert row["start"] == known_time(audit, flag.start)


def known_time(audit: Audit, k: int) -> str:
    stamp = np.datetime64(int(audit.record.time_ns(k)), "ns")
    return f"{np.datetime_as_string(stamp, unit='s')}Z"


def test_the_recommendation_tells_both_parts(audit: Audit) -> None:
    known = audit_object(audit)["recommendation"]
    chosen = audit.replays[known["replay"]]
    assert known["chosen_on"] == {name: getattr(chosen.first, name) for name in MEASURES}
    assert known["judged_on"] == {name: getattr(chosen.rest, name) for name in MEASURES}


def test_months_are_told_for_long_logs_only(audit: Audit) -> None:
    first = replace(
        audit.replays[0], by_period=(("2025-03", audit.replays[0].first), ("2025-04", audit.replays[0].rest))
    )
    known = audit_object(replace(audit, replays=(first, *audit.replays[1:])))
    assert [month["period"] for month in known["replays"][0]["by_period"]] == ["2025-03", "2025-04"]
    assert "by_period" not in known["replays"][1]
    assert VALIDATOR.is_valid(known)


def test_an_integral_time_that_is_infinite_is_null(audit: Audit) -> None:
    assert audit.model is not None
    model = replace(audit.model, controller=replace(audit.model.controller, integral_time=np.inf))
    assert audit_object(replace(audit, model=model))["controller"]["integral_time_s"] is None
