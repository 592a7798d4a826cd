"""Work on several threads."""

from __future__ import annotations

import threading
import time

import pytest

from auditor.progress import silent
from auditor.workers import run_each


@pytest.mark.parametrize("jobs", [1, 2, 7])
def test_results_come_in_order_whatever_the_number_of_threads(jobs: int) -> None:
    def slow_when_early(k: int) -> int:
        time.sleep(0.002 * (5 - k))
        return k * k

    assert run_each(slow_when_early, range(5), jobs, "squares", silent) == [0, 1, 4, 9, 16]


def test_progress_ends_at_one_and_never_goes_back() -> None:
    told: list[float] = []
    run_each(lambda k: k, range(8), 3, "work", lambda stage, done: told.append(done))
    assert told == sorted(told)
    assert told[-1] == 1.0


def test_an_error_drops_what_has_not_begun() -> None:
    begun: list[int] = []
    gate = threading.Event()

    def work(k: int) -> None:
        begun.append(k)
        if k == 0:
            gate.set()
            raise ValueError("broken piece")
        gate.wait()
        time.sleep(0.02)

    with pytest.raises(ValueError, match="broken piece"):
        run_each(work, range(500), 2, "work", silent)
    assert len(begun) < 500
