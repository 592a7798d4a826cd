"""What is counted: warm-up, the two parts, calendar months."""

from __future__ import annotations

from datetime import UTC, datetime

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from auditor.logs.record import Record, Span
from auditor.replay.counted import by_month, counted_spans, samples, split


def record(n: int, *spans: Span, period: float = 10.0, start: int = 0) -> Record:
    zeros = np.zeros(n)
    return Record(
        period=period,
        start=start,
        y=zeros,
        r=zeros,
        u=zeros,
        w=np.zeros((0, n)),
        valid=np.ones(n, dtype=bool),
        spans=spans,
    )


def test_warm_up_is_ten_time_constants_or_the_longest_silence() -> None:
    spans = (Span(0, 1000),)
    assert counted_spans(record(1000, *spans), 100.0, 0.0) == (Span(100, 1000),)
    assert counted_spans(record(1000, *spans), 100.0, 3000.0) == (Span(300, 1000),)


def test_a_span_that_is_mostly_warm_up_is_not_counted() -> None:
    # Warm-up 100 samples: a span of 199 is more than half warm-up, one of 200 is not.
    spans = (Span(0, 199), Span(300, 500))
    assert counted_spans(record(600, *spans), 100.0, 0.0) == (Span(400, 500),)


@given(
    st.lists(st.integers(1, 50), min_size=1, max_size=6),
    st.floats(0.1, 0.9),
)
def test_parts_together_are_all_counted_samples_in_order(lengths: list[int], share: float) -> None:
    at, spans = 0, []
    for length in lengths:
        spans.append(Span(at, at + length))
        at += length + 3
    first, rest = split(spans, share)
    covered = [k for s in (*first, *rest) for k in range(s.start, s.stop)]
    assert covered == [k for s in spans for k in range(s.start, s.stop)]
    assert samples(first) == round(share * sum(lengths))


def test_months_are_given_for_long_logs_only() -> None:
    start = int(datetime(2026, 1, 20, tzinfo=UTC).timestamp() * 1e9)
    day = 86_400.0
    short = record(60, Span(0, 60), period=day, start=start)
    assert by_month(short, short.spans) == ()
    long = record(70, Span(0, 70), period=day, start=start)
    assert by_month(long, long.spans) == (
        ("2026-01", (Span(0, 12),)),
        ("2026-02", (Span(12, 40),)),
        ("2026-03", (Span(40, 70),)),
    )
