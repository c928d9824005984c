"""Work through the rows of a project on all processors where the system can fork, else one after the other."""

from __future__ import annotations

import multiprocessing
import os
from collections.abc import Callable
from typing import Any, TypeVar

T = TypeVar("T")
_FEW = 24  # fewer rows than this are done sooner than processes start
_work: Callable[[int], Any]


def each_row(work: Callable[[int], T], rows: int, done: Callable[[int], object]) -> list[T]:
    """The results of `work` for every row in order; `done` is told how many are finished.

    Workers are forks, so `work` may close over anything; only its results travel.
    """
    global _work  # noqa: PLW0603  (a fork sees what is set before it; nothing else hands a closure over)
    processes = os.cpu_count() or 1
    if rows < _FEW or processes == 1 or "fork" not in multiprocessing.get_all_start_methods():
        results = []
        for row in range(rows):
            results.append(work(row))
            done(row + 1)
        return results
    _work = work
    results = []
    with multiprocessing.get_context("fork").Pool(processes) as pool:
        for result in pool.imap(_call, range(rows), chunksize=8):
            results.append(result)
            done(len(results))
    return results


def _call(row: int) -> Any:
    return _work(row)
