"""Independent pieces of work on several threads; the result does not depend on how many."""

from __future__ import annotations

import threading
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

from auditor.progress import Progress

_Item = TypeVar("_Item")
_Result = TypeVar("_Result")


def run_each(
    work: Callable[[_Item], _Result], items: Sequence[_Item], jobs: int, stage: str, progress: Progress
) -> list[_Result]:
    """Return ``[work(item) for item in items]``, computed on up to `jobs` threads.

    An error or an interruption drops the pieces that have not begun, and is raised again.

    Parameters
    ----------
    stage : str
        Name told to `progress`, with the share that is done after each piece.
    """
    counted = threading.Lock()
    done = 0

    def one(item: _Item) -> _Result:
        nonlocal done
        result = work(item)
        with counted:
            done += 1
            progress(stage, done / len(items))
        return result

    if jobs <= 1:
        return [one(item) for item in items]
    pool = ThreadPoolExecutor(jobs)
    try:
        return list(pool.map(one, items))
    finally:
        pool.shutdown(cancel_futures=True)
