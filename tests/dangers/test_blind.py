"""`blind`: no usable data for longer than the loop needs to settle."""

from __future__ import annotations

import numpy as np
import pytest

from auditor.dangers import blind
from auditor.logs.record import Span
from tests.dangers.cases import SAMPLES, SETTLING, Bench, plain_record, where


def holed(*holes: tuple[int, int], counted: tuple[Span, ...]) -> Bench:
    """A record without usable data in the holes."""
    valid = np.ones(SAMPLES, dtype=bool)
    for start, stop in holes:
        valid[start:stop] = False
    edges = [0, *(edge for hole in holes for edge in hole), SAMPLES]
    spans = tuple(Span(start, stop) for start, stop in zip(edges[::2], edges[1::2], strict=True))
    return Bench(record=plain_record(valid=valid, spans=spans), counted=counted)


def test_a_hole_is_flagged_under_every_plant_and_never_more_than_watched() -> None:
    bench = holed((200, 200 + SETTLING + 1), counted=(Span(10, 200), Span(240, SAMPLES)))
    bench.y[:] = 1.0  # outside every limit: it would be danger if anything could make it so
    flag = bench.only_flag(blind)
    assert where(flag) == (200, 221, "watch")
    assert flag.values == {"share": 1.0, "duration_s": 21 * 60.0, "resumes_after_s": 19 * 60.0}
    assert flag.detail == "no usable data for 21 min; samples count again 19 min later"


def test_a_hole_of_just_the_settling_time_is_not() -> None:
    assert holed((200, 200 + SETTLING), counted=(Span(10, 200), Span(240, SAMPLES))).flags(blind) == ()


def test_each_hole_has_its_flag() -> None:
    bench = holed((100, 130), (200, 230), counted=(Span(10, 100), Span(150, 200), Span(250, SAMPLES)))
    assert [where(flag)[:2] for flag in bench.flags(blind)] == [(100, 130), (200, 230)]


@pytest.mark.parametrize("rule", ["periodic", "send-on-delta"])
def test_it_does_not_depend_on_the_rule(rule: str) -> None:
    bench = holed((100, 130), counted=(Span(10, 100), Span(150, SAMPLES)))
    bench.rule = rule
    bench.updated[:] = rule == "periodic"
    assert where(bench.only_flag(blind)) == (100, 130, "watch")


def test_what_lies_before_or_after_everything_counted_is_not_needed() -> None:
    assert holed((0, 50), (350, SAMPLES), counted=(Span(60, 350),)).flags(blind) == ()
    assert holed((100, 150), counted=()).flags(blind) == ()
