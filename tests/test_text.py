"""Words and numbers as people read them."""

from __future__ import annotations

import math

import pytest

from auditor.text import duration, nearest, number, percent, quantity


@pytest.mark.parametrize(
    ("seconds", "written"),
    [
        (0.0, "0 s"),
        (0.05, "50 ms"),
        (1.0, "1 s"),
        (59.0, "59 s"),
        (90.0, "1.5 min"),
        (-90.0, "-1.5 min"),
        (3600.0, "1 h"),
        (7 * 86400.0, "7 d"),
        (1e-5, "1e-05 s"),
    ],
)
def test_durations_are_in_the_largest_unit_that_reads_well(seconds: float, written: str) -> None:
    assert duration(seconds) == written


@pytest.mark.parametrize(
    ("value", "digits", "written"),
    [
        (0.0, 3, "0.00"),
        (0.012345, 3, "0.0123"),
        (12.345, 3, "12.3"),
        (12345.0, 3, "12\u202f345"),
        (-1.5, 2, "-1.5"),
        (2e7, 3, "2.00e+07"),
        (5e-5, 2, "5.0e-05"),
        (None, 3, "–"),
        (math.inf, 3, "–"),
        (math.nan, 3, "–"),
    ],
)
def test_numbers_keep_their_significant_digits(value: float | None, digits: int, written: str) -> None:
    assert number(value, digits) == written


def test_a_number_without_a_unit_has_no_space_behind_it() -> None:
    assert quantity(0.25, "m") == "0.25 m"
    assert quantity(0.25, "") == "0.25"


def test_percentages() -> None:
    assert percent(0.256) == "26 %"
    assert percent(0.256, 1) == "25.6 %"
    assert percent(None) == percent(math.inf) == "–"


def test_the_nearest_word_must_be_near() -> None:
    known = ["send-on-delta", "send-on-area", "clock"]
    assert nearest("send-on-detla", known) == "send-on-delta"
    assert nearest("quux", known) is None
