"""`burst`: more than the channel carries, or updates at every sample."""

from __future__ import annotations

import pytest

from auditor.dangers import burst
from auditor.loop import Channel
from tests.dangers.cases import SETTLING, Bench, where

CHANNEL = {"channel": Channel(window=600.0, max_messages=6, other_traffic=2)}


def crowded(*updates: int, **changes: object) -> Bench:
    """Updates at these samples only, on a channel with room for 4 in any 10 samples."""
    bench = Bench(**{"loop_changes": CHANNEL, **changes})
    bench.updated[:] = False
    bench.updated[list(updates)] = True
    return bench


def test_one_update_more_than_the_window_has_room_for_is_flagged() -> None:
    flag = crowded(50, 100, 101, 104, 106, 109, 150).only_flag(burst)
    assert where(flag) == (100, 110, "danger")
    assert flag.values == pytest.approx(
        {"share": 1.0, "duration_s": 600.0, "worst": 5.0, "budget": 4.0, "window_s": 600.0}
    )
    assert flag.detail.startswith("up to 5.0 updates within 10 min where the channel has room for 4.0, for 10 min")


def test_the_same_updates_in_a_little_more_than_a_window_are_not() -> None:
    assert crowded(100, 101, 104, 106, 110).flags(burst) == ()


def test_no_room_at_all_makes_every_update_too_much() -> None:
    channel = {"channel": Channel(window=600.0, max_messages=2, other_traffic=5)}
    flag = crowded(100, loop_changes=channel).only_flag(burst)
    assert (*where(flag), flag.values["budget"]) == (100, 101, "danger", -3.0)


@pytest.mark.parametrize(
    ("limits", "budget"),
    [
        # A window of 600 s holds eight messages of 75 s, of which three are others'; a third of it holds two and 2/3.
        ({"airtime": 75.0, "other_traffic": 3}, 5.0),
        ({"airtime": 75.0, "other_traffic": 3, "duty_cycle": 1 / 3}, 8 / 3),
        ({"airtime": 1.0, "other_traffic": 3}, 7.0),
    ],
    ids=["airtime", "duty cycle", "count"],
)
def test_time_on_the_air_bounds_the_budget_as_well(limits: dict[str, float], budget: float) -> None:
    channel = {"channel": Channel(window=600.0, max_messages=10, **limits)}
    allowed = int(budget)
    assert crowded(*range(100, 100 + allowed), loop_changes=channel).flags(burst) == ()
    flag = crowded(*range(100, 101 + allowed), loop_changes=channel).only_flag(burst)
    assert flag.values["budget"] == pytest.approx(budget)


def test_a_window_that_holds_fewer_samples_than_the_budget_cannot_overflow() -> None:
    channel = {"channel": Channel(window=240.0, max_messages=4)}
    bench = crowded(loop_changes=channel, rule="periodic")
    bench.updated[:] = True
    assert bench.flags(burst) == ()


@pytest.mark.parametrize(("samples", "flagged"), [(SETTLING, False), (SETTLING + 1, True)])
def test_an_update_at_every_sample_for_longer_than_settling_is_watched(samples: int, flagged: bool) -> None:
    bench = crowded(loop_changes={})
    bench.updated[100 : 100 + samples] = True
    flags = bench.flags(burst)
    assert [where(flag) for flag in flags] == ([(100, 121, "watch")] if flagged else [])
    assert [flag.values["run_s"] for flag in flags] == ([21 * 60.0] if flagged else [])


def test_a_clock_is_asked_to_update_at_every_sample() -> None:
    bench = crowded(loop_changes={}, rule="periodic")
    bench.updated[:] = True
    assert bench.flags(burst) == ()


def test_a_clock_can_still_be_too_much_for_the_channel() -> None:
    bench = crowded(rule="periodic")
    bench.updated[:] = True
    flag = bench.only_flag(burst)
    assert where(flag) == (10, 400, "danger")
    assert flag.values["worst"] == 10.0


def test_a_budget_broken_under_few_plants_stays_watch() -> None:
    bench = crowded(loop_changes=CHANNEL)
    bench.updated[100:103] = True
    bench.updated[103:106, :9] = True
    assert where(bench.only_flag(burst)) == (100, 106, "watch")
