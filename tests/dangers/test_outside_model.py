"""`outside-model`: where the model was never seen to hold."""

from __future__ import annotations

import numpy as np
import pytest

from auditor.dangers import outside_model
from auditor.logs.record import Span
from tests.dangers.cases import SAMPLES, Bench, plain_record, where


def ranged(**changes: object) -> Bench:
    """A record that covers 1.9…2.1 m and 40…60 %: a quarter of it is 0.05 m and 5 %."""
    record = plain_record(
        y=2.0 + 0.1 * np.where(np.arange(SAMPLES) % 2, 1.0, -1.0),
        u=50.0 + 10.0 * np.where(np.arange(SAMPLES) % 2, 1.0, -1.0),
    )
    return Bench(record=record, **changes)


@pytest.mark.parametrize(("value", "flagged"), [(2.149, False), (2.16, True), (1.84, True), (1.851, False)])
def test_a_measurement_beyond_the_margin_is_flagged(value: float, flagged: bool) -> None:
    bench = ranged()
    bench.y[100:110, :10] = value
    flags = bench.flags(outside_model)
    assert [where(flag) for flag in flags] == ([(100, 110, "danger")] if flagged else [])


def test_its_evidence_is_the_distance_from_the_range() -> None:
    bench = ranged()
    bench.y[100:110] = 2.18
    flag = bench.only_flag(outside_model)
    assert flag.values == pytest.approx(
        {"share": 1.0, "duration_s": 600.0, "worst": 0.08, "seen_low": 1.9, "seen_high": 2.1, "margin": 0.05}
    )
    assert flag.detail == (
        "level 0.080 m outside the range seen in the record, 1.90 m to 2.10 m, by more than the allowed 0.050 m "
        "for 10 min under 100 % of the likely plants"
    )


def test_an_actuator_beyond_the_margin_is_flagged_in_its_own_unit() -> None:
    bench = ranged()
    bench.u[100:110, :4] = 30.0
    flag = bench.only_flag(outside_model)
    assert where(flag) == (100, 110, "watch")
    assert flag.values["worst"] == 10.0
    assert flag.detail.startswith("gate 10 % outside the range")


def test_the_signal_outside_under_more_plants_is_told() -> None:
    bench = ranged()
    bench.u[100:110, :4] = 30.0
    bench.y[100:110, :5] = 2.2
    assert bench.only_flag(outside_model).detail.startswith("level")


def test_what_was_recorded_outside_the_spans_was_not_used_to_identify() -> None:
    y = ranged().record.y.copy()
    y[:50] = 2.4
    bench = Bench(record=plain_record(y=y, spans=(Span(50, SAMPLES),)), counted=(Span(60, SAMPLES),))
    bench.y[100:110] = 2.2
    assert where(bench.only_flag(outside_model)) == (100, 110, "danger")
