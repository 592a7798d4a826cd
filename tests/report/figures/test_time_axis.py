from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from auditor.audit import Audit
from auditor.report.figures.time_axis import envelope, ticks_between
from auditor.report.times import local_clock

SECOND = 10**9
DAY = 86_400 * SECOND
MARCH_29 = 1_743_202_800 * SECOND  # 2025-03-29 00:00 in Amsterdam; clocks go forward on the 30th


def test_ticks_stand_at_local_midnights_across_a_clock_change() -> None:
    ticks = ticks_between(local_clock("Europe/Amsterdam", 60.0), MARCH_29, MARCH_29 + 4 * DAY)
    labelled = {text: at for at, text in ticks}
    assert {"29 Mar", "30 Mar", "31 Mar", "1 Apr"} <= set(labelled)
    assert labelled["30 Mar"] - labelled["29 Mar"] == pytest.approx(1.0, abs=1e-9)
    assert labelled["31 Mar"] - labelled["30 Mar"] == pytest.approx(23 / 24, abs=1e-9)  # that day has 23 hours


@pytest.mark.parametrize("reach_s", [0.004, 0.9, 7, 50, 400, 3_000, 20_000, 9e4, 7e5, 5e6, 4e7, 6e8])
def test_any_reach_has_a_few_ticks_inside_it(reach_s: float) -> None:
    first, last = MARCH_29, MARCH_29 + int(reach_s * SECOND)
    ticks = ticks_between(local_clock("Europe/Amsterdam", 0.001), first, last)
    assert 2 <= len(ticks) <= 9
    assert len({text for _, text in ticks}) == len(ticks)
    # Days as floats carry about a microsecond.
    assert all(first / DAY - 1e-10 <= at <= last / DAY + 1e-10 for at, _ in ticks)


def test_an_envelope_keeps_every_extreme_and_every_hole(audit: Audit) -> None:
    values = np.sin(np.arange(len(audit.record)) / 50.0)
    values[1234] = 9.0
    values[5000:6000] = np.nan
    drawn = envelope(audit.record, values, columns=100)
    assert len(drawn.at) == 100
    assert np.nanmax(drawn.high) == 9.0
    assert np.nanmin(drawn.low) == np.nanmin(values)
    assert np.isnan(drawn.low).sum() == 5  # 1 000 samples of 200 a column
    assert (np.diff(drawn.at) > 0).all()


def test_a_short_series_is_drawn_as_it_is(audit: Audit) -> None:
    short = replace(audit.record, y=audit.record.y[:7])
    drawn = envelope(short, short.y)
    np.testing.assert_array_equal(drawn.low, short.y)
    np.testing.assert_array_equal(drawn.high, short.y)
