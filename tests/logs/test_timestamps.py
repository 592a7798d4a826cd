"""Time stamps: RFC 3339, epochs, dates that leave the order open, local clocks, the two changes of the clock."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from written_logs import SECOND, START, problem_of_text, problem_of_times, problems_of, read, read_text, read_times

AMSTERDAM = "Europe/Amsterdam"
MINUTE, HOUR = 60 * SECOND, 3600 * SECOND


def instant(text: str) -> int:
    """Nanoseconds since 1970 of a plain stamp with an offset, by the standard library."""
    return round(datetime.fromisoformat(text).timestamp()) * SECOND


# Values seen in public test suites of RFC 3339 parsers; the stamps are the examples of RFC 3339 §5.8.
@pytest.mark.parametrize(
    ("stamp", "nanoseconds"),
    [
        ("1985-04-12T23:20:50.52Z", 482_196_050_520_000_000),
        ("1985-04-12t23:20:50.52z", 482_196_050_520_000_000),
        ("1996-12-19T16:39:57-08:00", 851_042_397 * SECOND),
        ("1996-12-20T00:39:57Z", 851_042_397 * SECOND),
        ("1937-01-01T12:00:27.87+00:20", -1_041_337_172_130_000_000),
        # A leap second is the last nanosecond of its minute.
        ("1990-12-31T23:59:60Z", 662_688_000 * SECOND - 1),
        ("1990-12-31T15:59:60-08:00", 662_688_000 * SECOND - 1),
        # ISO 8601, not RFC 3339, and without a doubt.
        ("2020-01-01T24:00:00Z", instant("2020-01-02T00:00:00+00:00")),
        ("20200101T000000Z", instant("2020-01-01T00:00:00+00:00")),
        ("2020-01-01T00:00:00,5Z", instant("2020-01-01T00:00:00+00:00") + SECOND // 2),
        ("2020-01-01 00:00+01", instant("2019-12-31T23:00:00+00:00")),
        # Finer than a nanosecond: cut.
        ("2020-01-01T00:00:00.1234567899Z", instant("2020-01-01T00:00:00+00:00") + 123_456_789),
    ],
)
def test_a_stamp_with_an_offset_is_read_to_the_nanosecond(tmp_path: Path, stamp: str, nanoseconds: int) -> None:
    assert read_times(tmp_path, [stamp]) == [nanoseconds]


def test_a_leap_second_stands_between_second_59_and_the_next_minute(tmp_path: Path) -> None:
    stamps = ["2016-12-31T23:59:59.999Z", "2016-12-31T23:59:60Z", "2016-12-31T23:59:60.7Z", "2017-01-01T00:00:00Z"]
    before, leap, within, after = read_times(tmp_path, stamps)
    assert before < leap == within < after


@pytest.mark.parametrize(
    "stamp",
    [
        "1990-12-30T23:59:60Z",  # not the last day of a month
        "1990-12-31T23:59:60-08:00",  # 07:59:60 UTC
        "2020-13-01T00:00:00Z",
        "2021-02-29T00:00:00Z",
        "2020-01-01T24:00:01Z",
        "2020-01-01T00:60:00Z",
        "2020-01-01T00:00:61Z",
        "2020-01-01T00:00:00+24:00",
        "3000-01-01T00:00:00Z",
        "2020-W01-1",
        "yesterday",
    ],
)
def test_a_stamp_that_names_no_time_is_refused_with_its_line(tmp_path: Path, stamp: str) -> None:
    problem = problem_of_times(tmp_path, ["2020-01-01T00:00:00Z", stamp, "2020-01-01T00:02:00Z"])
    assert "log.csv, line 3" in problem.where
    assert stamp in problem.found


def test_unread_stamps_are_counted(tmp_path: Path) -> None:
    problem = problem_of_times(tmp_path, ["2020-01-01T00:00:00Z", "?1", "?2", "?3", "2020-01-01T00:02:00Z"])
    assert '"?1" and 2 more' in problem.found


def test_a_stamp_without_an_offset_needs_a_zone(tmp_path: Path) -> None:
    problem = problem_of_times(tmp_path, ["2020-01-01T00:00:00"])
    assert "timezone" in problem.do
    assert "line 2" in problem.where
    assert read_times(tmp_path, ["2020-01-01T00:00:00"], timezone="UTC") == [instant("2020-01-01T00:00:00+00:00")]


def test_an_unknown_zone_names_the_nearest(tmp_path: Path) -> None:
    assert AMSTERDAM in problem_of_times(tmp_path, ["2020-01-01T00:00:00"], timezone="Europe/Amsterdm").do


def test_stamps_with_and_without_offset_may_be_mixed(tmp_path: Path) -> None:
    times = read_times(tmp_path, ["2020-07-01T12:00:00+02:00", "2020-07-01T12:01:00"], timezone=AMSTERDAM)
    assert times == [instant("2020-07-01T10:00:00+00:00"), instant("2020-07-01T10:01:00+00:00")]


def test_an_offset_makes_the_zone_utc(tmp_path: Path) -> None:
    text = "time,level,gate\n2020-07-01T12:00:00+02:00,1,2\n"
    assert read_text(tmp_path, text, timezone=AMSTERDAM).zone == "UTC"
    assert read_text(tmp_path, text.replace("+02:00", ""), timezone=AMSTERDAM).zone == AMSTERDAM


moments = st.datetimes(min_value=datetime(1700, 1, 1), max_value=datetime(2260, 1, 1))
offsets = st.integers(-23 * 60, 23 * 60).map(lambda minutes: timezone(timedelta(minutes=minutes)))
dresses = st.sampled_from(["{}", "lower", "space", "zulu", "compact offset"])


def dressed(moment: datetime, dress: str) -> str:
    text = moment.isoformat()
    if dress == "lower":
        return text.lower()
    if dress == "space":
        return text.replace("T", " ")
    if dress == "zulu":
        return moment.astimezone(UTC).isoformat().replace("+00:00", "Z")
    return text[:-3] + text[-2:] if dress == "compact offset" else text


@given(st.lists(st.tuples(moments, offsets, dresses), min_size=1, max_size=8))
@settings(max_examples=60, deadline=None)
def test_stamps_come_back_whatever_their_dress(tmp_path_factory: pytest.TempPathFactory, rows: list) -> None:
    folder = tmp_path_factory.getbasetemp()
    moments = [moment.replace(tzinfo=offset) for moment, offset, _ in rows]
    stamps = [dressed(moment, dress) for moment, (_, _, dress) in zip(moments, rows, strict=True)]
    since_1970 = [moment - datetime(1970, 1, 1, tzinfo=UTC) for moment in moments]
    expected = [((s.days * 86400 + s.seconds) * 10**6 + s.microseconds) * 1000 for s in since_1970]
    assert read_times(folder, stamps) == expected


@given(st.integers(0, 2**32 - 1), st.sampled_from(["Europe/Amsterdam", "America/St_Johns", "Australia/Lord_Howe"]))
@settings(max_examples=40, deadline=None)
def test_local_times_come_back(tmp_path_factory: pytest.TempPathFactory, seconds: int, zone: str) -> None:
    local = datetime.fromtimestamp(seconds, tz=ZoneInfo(zone))
    choice = "second" if local.fold else "first"
    stamp = local.replace(tzinfo=None).isoformat()
    assert read_times(tmp_path_factory.getbasetemp(), [stamp], timezone=zone, ambiguous=choice) == [seconds * SECOND]


# --- Epochs


@pytest.mark.parametrize(
    ("cells", "unit", "first_step"),
    [
        (["1735689600", "1735689660"], "s", MINUTE),
        (["1735689600.000000001", "1735689600.100000001"], "s", SECOND // 10),
        (["1.7356896e9", "1735689601"], "s", SECOND),
        (["1735689600000", "1735689600000.5"], "ms", 500_000),
        (["1735689600000000", "1735689600000001"], "us", 1_000),
        (["1735689600000000000", "1735689600000000001"], "ns", 1),
        (["1735689600.00000000099", "1735689600.0000000019"], "s", 1),  # cut below the nanosecond
        (["173568960000000000000e-11", "1735689600.1e0"], "s", SECOND // 10),
    ],
)
def test_epochs_are_exact_to_the_last_digit(tmp_path: Path, cells: list[str], unit: str, first_step: int) -> None:
    first, second = read_times(tmp_path, cells, time_unit=unit)
    assert abs(first - START) <= 1  # the rows above start at START or one nanosecond after it
    assert second - first == first_step


@pytest.mark.parametrize(
    ("cell", "unit"),
    [("1735689600", "s"), ("1735689600000", "ms"), ("1735689600000000", "us"), ("1735689600000000000", "ns")],
)
def test_numbers_without_a_unit_are_refused_with_the_unit_that_fits(tmp_path: Path, cell: str, unit: str) -> None:
    problem = problem_of_times(tmp_path, [cell, cell])
    assert f'time_unit = "{unit}"' in problem.do
    assert "2025" in problem.do


def test_numbers_that_look_like_dates_are_offered_a_format(tmp_path: Path) -> None:
    stamps = ["20250102030405", "20250102030406"]
    problem = problem_of_times(tmp_path, stamps)
    assert 'time_format = "%Y%m%d%H%M%S"' in problem.do
    times = read_times(tmp_path, stamps, time_format="%Y%m%d%H%M%S", timezone="UTC")
    assert times[0] == instant("2025-01-02T03:04:05+00:00")


def test_numbers_too_large_for_their_unit_question_the_unit(tmp_path: Path) -> None:
    problem = problem_of_times(tmp_path, ["1735689600000"], time_unit="s")
    assert 'time_unit = "s"' in problem.do


def test_an_epoch_may_have_a_decimal_comma(tmp_path: Path) -> None:
    text = "time;level;gate\n1735689600,5;2,0;1\n1735689601,5;2,1;1\n"
    assert list(read_text(tmp_path, text, time_unit="s").time) == [START + SECOND // 2, START + 3 * SECOND // 2]


def test_dates_under_a_unit_are_refused(tmp_path: Path) -> None:
    problem = problem_of_times(tmp_path, ["2025-01-01T00:00:00Z", "2025-01-01T00:01:00Z"], time_unit="s")
    assert "take time_unit out" in problem.do
    assert problem_of_times(tmp_path, ["1"], time_unit="min").found == '"min"'


# --- Day and month


def test_days_and_months_that_may_be_swapped_are_refused_with_both_lines(tmp_path: Path) -> None:
    problem = problem_of_times(tmp_path, ["03/04/2025 12:00:00", "03/04/2025 12:01:00"], timezone="UTC")
    assert 'time_format = "%d/%m/%Y %H:%M:%S"' in problem.do
    assert 'time_format = "%m/%d/%Y %H:%M:%S"' in problem.do
    assert "line 2" in problem.where


@pytest.mark.parametrize(
    ("stamps", "expected"),
    [
        (["12/01/2025 06:00", "13/01/2025 06:00"], "2025-01-12T06:00:00+00:00"),
        (["01/12/2025 06:00", "01/13/2025 06:00"], "2025-01-12T06:00:00+00:00"),
        (["1/2/2025 6:00:00 AM", "1/13/2025 12:00:00 PM"], "2025-01-02T06:00:00+00:00"),
        (["03/03/2025 06:00:00", "03/03/2025 06:01:00"], "2025-03-03T06:00:00+00:00"),  # the same either way
        (["01.02.2025 06:00:00"], "2025-02-01T06:00:00+00:00"),  # points: day first
        (["2025/02/01 06:00"], "2025-02-01T06:00:00+00:00"),
        (["1-Feb-2025 06:00:00"], "2025-02-01T06:00:00+00:00"),
        (["01 FEBRUARY 2025 06:00:00"], "2025-02-01T06:00:00+00:00"),
        (["2025-02-01"], "2025-02-01T00:00:00+00:00"),
    ],
)
def test_an_order_that_is_settled_is_read(tmp_path: Path, stamps: list[str], expected: str) -> None:
    assert read_times(tmp_path, stamps, timezone="UTC")[0] == instant(expected)


def test_one_file_settles_the_order_for_all(tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text("time,level,gate\n12/01/2025 06:00,1,2\n")
    (tmp_path / "b.csv").write_text("time,level,gate\n13/01/2025 06:00,1,2\n")
    log = read(tmp_path, "*.csv", timezone="UTC")
    assert log.time[1] - log.time[0] == 24 * HOUR


def test_dates_in_both_orders_are_refused(tmp_path: Path) -> None:
    problem = problem_of_times(tmp_path, ["13/01/2025 06:00", "01/14/2025 06:00"], timezone="UTC")
    assert "line 2" in problem.where
    assert "line 3" in problem.where


@pytest.mark.parametrize(
    ("time_format", "stamp"),
    [
        ("%d/%m/%Y %H:%M:%S", "03/04/2025 12:00:00"),
        ("%m/%d/%y %I:%M %p", "4/3/25 12:00 PM"),
        ("%d-%b-%y %T", "03-Apr-25 12:00:00"),
        ("%d.%m.%Y %H:%M:%S,%f", "03.04.2025 12:00:00,000"),
        ("%d.%m.%Y %H:%M:%S%z", "03.04.2025 14:00:00+0200"),
        ("%Y年%m月%d日 %R", "2025年4月3日 12:00"),
    ],
)
def test_a_stated_format_is_followed(tmp_path: Path, time_format: str, stamp: str) -> None:
    times = read_times(tmp_path, [stamp], time_format=time_format, timezone="UTC")
    assert times == [instant("2025-04-03T12:00:00+00:00")]


@pytest.mark.parametrize("time_format", ["dd.mm.yyyy", "%d.%m %H:%M", "%d.%d.%Y", "%Q.%m.%Y", "%Y-%m-%d %I:%M"])
def test_a_format_that_is_none_is_refused(tmp_path: Path, time_format: str) -> None:
    problem = problem_of_times(tmp_path, ["01.02.2025 00:00"], time_format=time_format, timezone="UTC")
    assert problem.where == "[log] time_format"


def test_a_year_of_two_digits_is_refused_with_the_lines_that_may_be_meant(tmp_path: Path) -> None:
    problem = problem_of_times(tmp_path, ["03/04/25 12:00"], timezone="UTC")
    for line in ("%d/%m/%y %H:%M", "%m/%d/%y %H:%M", "%y/%m/%d %H:%M"):
        assert f'time_format = "{line}"' in problem.do


def test_a_date_and_a_clock_column_are_read_together(tmp_path: Path) -> None:
    text = "Date;Clock;level;gate\n13.01.2025;06:00:00;1;2\n13.01.2025;06:01:00;1;2\n"
    log = read_text(tmp_path, text, time="Date + Clock", timezone="UTC")
    assert list(log.time) == [instant("2025-01-13T06:00:00+00:00"), instant("2025-01-13T06:01:00+00:00")]


# --- The changes of the clock: Europe/Amsterdam, 30 March and 26 October 2025, both at 01:00 UTC


def local_stamps(start: str, count: int, step_s: int, zone: str = AMSTERDAM) -> tuple[list[str], list[int]]:
    """Stamps of a local clock at even steps, and their instants."""
    first = instant(start)
    instants = [first + k * step_s * SECOND for k in range(count)]
    clock = ZoneInfo(zone)
    moments = [datetime.fromtimestamp(time // SECOND, tz=clock) for time in instants]
    return [moment.strftime("%Y-%m-%d %H:%M:%S") for moment in moments], instants


@pytest.mark.parametrize("step_s", [60, 1800, 3600])
@pytest.mark.parametrize("start", ["2025-03-29T20:00:00+00:00", "2025-10-25T20:00:00+00:00"])
def test_a_clock_is_followed_through_both_changes(tmp_path: Path, start: str, step_s: int) -> None:
    stamps, instants = local_stamps(start, 10 * 3600 // step_s, step_s)
    assert read_times(tmp_path, stamps, timezone=AMSTERDAM) == instants


def test_newest_first_is_followed_through_the_repeated_hour(tmp_path: Path) -> None:
    stamps, instants = local_stamps("2025-10-25T22:00:00+00:00", 60, 300)
    assert read_times(tmp_path, stamps[::-1], timezone=AMSTERDAM) == instants[::-1]


def test_the_pass_may_be_stated(tmp_path: Path) -> None:
    stamps = ["2025-10-26 02:30:00"]
    first = read_times(tmp_path, stamps, timezone=AMSTERDAM, ambiguous="first")
    second = read_times(tmp_path, stamps, timezone=AMSTERDAM, ambiguous="second")
    assert first == [instant("2025-10-26T02:30:00+02:00")]
    assert second == [instant("2025-10-26T02:30:00+01:00")]


@pytest.mark.parametrize(
    ("start", "expected_offset"),
    [("2025-10-25T23:00:00+00:00", "+02:00"), ("2025-10-26T01:10:00+00:00", "+01:00")],
)
def test_a_single_pass_joins_its_neighbours_and_is_said(tmp_path: Path, start: str, expected_offset: str) -> None:
    stamps, instants = local_stamps(start, 11 if expected_offset == "+02:00" else 40, 600)
    text = "time,level,gate\n" + "".join(f"{stamp},1,2\n" for stamp in stamps)
    log = read_text(tmp_path, text, timezone=AMSTERDAM)
    assert list(log.time) == instants
    (finding,) = log.findings
    assert finding.kind == "repeated-hour"
    assert finding.count == sum(" 02:" in stamp for stamp in stamps)


def test_an_hour_cut_between_two_files_is_followed(tmp_path: Path) -> None:
    stamps, instants = local_stamps("2025-10-26T00:00:00+00:00", 120, 60)  # the repeated hour, nothing else
    for name, rows in (("a.csv", stamps[:60]), ("b.csv", stamps[60:])):
        (tmp_path / name).write_text("time,level,gate\n" + "".join(f"{stamp},1,2\n" for stamp in rows))
    assert list(read(tmp_path, "*.csv", timezone=AMSTERDAM).time) == instants


def test_an_order_that_does_not_tell_the_passes_apart_is_refused(tmp_path: Path) -> None:
    minutes = (0, 20, 40, 10, 30, 50, 5)
    problem = problem_of_times(tmp_path, [f"2025-10-26 02:{m:02}:00" for m in minutes], timezone=AMSTERDAM)
    assert "ambiguous" in problem.do
    assert "line 2" in problem.where


def test_a_skipped_hour_is_refused_with_its_line(tmp_path: Path) -> None:
    stamps = ["2025-03-30 01:59:00", "2025-03-30 02:00:00", "2025-03-30 02:59:59", "2025-03-30 03:00:00"]
    problem = problem_of_times(tmp_path, stamps, timezone=AMSTERDAM)
    assert "line 3" in problem.where
    assert '"2025-03-30 02:00:00" and 1 more' in problem.found
    assert "Etc/GMT-1" in problem.do


def test_all_problems_of_the_clock_are_said_together(tmp_path: Path) -> None:
    minutes = (0, 20, 40, 10, 30, 50, 5)
    stamps = ["2025-03-30 02:30:00", *(f"2025-10-26 02:{minute:02}:00" for minute in minutes)]
    text = "time,level,gate\n" + "".join(f"{stamp},1,2\n" for stamp in stamps)
    (tmp_path / "log.csv").write_text(text)
    assert len(problems_of(tmp_path, timezone=AMSTERDAM)) == 2


def test_an_unknown_choice_of_pass_is_refused(tmp_path: Path) -> None:
    assert problem_of_text(tmp_path, "time,level,gate\n", ambiguous="third").where == "[log] ambiguous"
