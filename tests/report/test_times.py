from __future__ import annotations

import pytest

from auditor.report.times import local_clock, utc

AUTUMN = 1_761_438_600 * 10**9  # 2025-10-26 00:30 UTC, 02:30 summer time in Amsterdam; 02:30 again an hour later


@pytest.mark.parametrize(
    ("ns", "text"),
    [
        (0, "1970-01-01T00:00:00Z"),
        (1_742_770_800_000_000_000, "2025-03-23T23:00:00Z"),
        (1_500_000_000, "1970-01-01T00:00:01.5Z"),
        (1, "1970-01-01T00:00:00.000000001Z"),
        (-1_000_000_000, "1969-12-31T23:59:59Z"),
    ],
)
def test_utc_keeps_every_nanosecond_and_no_idle_zero(ns: int, text: str) -> None:
    assert utc(ns) == text


def test_local_time_follows_the_zone_of_the_log() -> None:
    clock = local_clock("Europe/Amsterdam", 60.0)
    assert clock.moment(1_742_770_800 * 10**9) == "2025-03-24 00:00"
    assert clock.moment(1_743_300_000 * 10**9) == "2025-03-30 04:00"  # after the clock change at 01:00 UTC


def test_the_repeated_hour_is_told_apart() -> None:
    clock = local_clock("Europe/Amsterdam", 60.0)
    assert clock.moment(AUTUMN) == "2025-10-26 02:30 (+02:00)"
    assert clock.moment(AUTUMN + 3600 * 10**9) == "2025-10-26 02:30 (+01:00)"


def test_seconds_are_written_for_fast_loops_only() -> None:
    assert local_clock("UTC", 0.25).moment(5 * 10**9) == "1970-01-01 00:00:05"
    assert local_clock("UTC", 60.0).moment(5 * 10**9) == "1970-01-01 00:00"


def test_an_unknown_zone_is_told_as_utc() -> None:
    assert local_clock("Mars/Olympus", 60.0).name == "UTC"
