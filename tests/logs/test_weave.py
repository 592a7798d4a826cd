"""Weaving, against walking along the rows."""

from __future__ import annotations

from collections import Counter, defaultdict

import numpy as np
import pytest

from auditor.logs.weave import Strand, woven


def naive(times: dict[str, list[int]]) -> dict[tuple[int, int], dict[str, int]]:
    """Return, for every (stamp, occurrence), which row of which strand belongs there: the slow way."""
    rows: dict[tuple[int, int], dict[str, int]] = defaultdict(dict)
    for name, time in times.items():
        seen: Counter[int] = Counter()
        for row, stamp in enumerate(time):
            rows[stamp, seen[stamp]][name] = row
            seen[stamp] += 1
    return rows


def strand(name: str, time: list[int]) -> Strand:
    values = np.arange(len(time), dtype=np.float64)
    return Strand(time=np.array(time, dtype=np.int64), channels={name: values}, texts={}, own={})


@pytest.mark.parametrize("seed", range(30))
def test_every_row_has_its_place(seed: int) -> None:
    generator = np.random.default_rng(seed)
    times = {name: generator.integers(0, 25, generator.integers(1, 30)).tolist() for name in "yru"}
    if seed % 3 == 0:
        times = {name: sorted(time) for name, time in times.items()}
    log = woven([strand(name, time) for name, time in times.items()], "y")
    expected = naive(times)
    assert len(log.time) == len(expected)
    place: Counter[int] = Counter()
    found = {}
    for name in "yru":
        assert int(log.own[name].sum()) == len(times[name])
        # A row of a strand is recognised by its value, which is its number.
        for stamp, value, own in zip(log.time.tolist(), log.channels[name].tolist(), log.own[name], strict=True):
            assert own == np.isfinite(value)
            if own:
                found[name, int(value)] = stamp
    assert found == {(name, row): stamp for name, time in times.items() for row, stamp in enumerate(time)}
    for row, stamp in enumerate(log.time.tolist()):
        together = {n: int(log.channels[n][row]) for n in "yru" if log.own[n][row]}
        assert together in [rows for (at, _), rows in expected.items() if at == stamp]
        place[stamp] += 1
    assert place == Counter(stamp for stamp, _ in expected)
    leading = log.channels["y"][log.own["y"]]
    np.testing.assert_array_equal(leading, np.arange(len(times["y"])))


def test_sorted_strands_give_rows_in_order_of_time() -> None:
    log = woven([strand("y", [10, 20, 30]), strand("u", [5, 20, 25])], "y")
    assert log.time.tolist() == [5, 10, 20, 25, 30]
    np.testing.assert_array_equal(log.channels["u"], [0, np.nan, 1, 2, np.nan])


def test_words_of_a_mode_are_empty_where_it_has_no_row() -> None:
    mode = Strand(time=np.array([7]), channels={}, texts={"m": np.array(["AUTO"], dtype=object)}, own={}, mode="m")
    log = woven([strand("y", [5, 7]), mode], "y")
    assert log.texts["m"].tolist() == ["", "AUTO"]


def test_one_strand_stays_as_it_is() -> None:
    only = strand("y", [3, 1, 2])
    assert woven([only], "y") is only
