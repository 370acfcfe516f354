"""Points on all cores: pieces of a table, evaluated by threads or by processes, in their order.

The march runs outside Python's lock, so threads share one compiled kernel and nothing is copied; processes are for long plans, where
their start-up is small and a crash costs one piece, or for any where a crash has to be outlived.
"""

import contextlib
import os
from collections import deque
from collections.abc import Callable, Generator, Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from functools import partial

import pandas as pd

from sweep.base.errors import SweepError
from sweep.plan import Planned
from sweep.plant import evaluate
from sweep.runner.crew import Crew, Note
from sweep.runner.worker import PIECE, evaluate_rows
from sweep.study.model import Study

TASK, AHEAD = 4096, 8  # points that a worker process takes at a time; tasks per worker that are begun before the first of them is asked for
PROCESSES_FROM = 32_768  # points; below, threads are done before processes have started
Rows = Callable[[], pd.DataFrame]


def cores(workers: int | None) -> int:
    """Return how many workers run; SweepError for less than one."""
    if workers is None:
        return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    if workers < 1:
        raise SweepError(f"workers: found {workers}, expected 1 or more")
    return workers


def _pieces(count: int, workers: int) -> list[tuple[int, int]]:
    """Return from where to where each piece goes; small tables are shared evenly."""
    size = min(PIECE, max(128, -(-count // workers)))
    return [(start, min(start + size, count)) for start in range(0, count, size)]


def _cut(points: pd.DataFrame, start: int, stop: int) -> pd.DataFrame:
    return points.iloc[start:stop]


def simulate(study: Study, points: pd.DataFrame, workers: int | None = None, apart: bool = False) -> pd.DataFrame:
    """Return inputs and responses of points (a column per variable or dotted path, SI), same index.

    A frame without columns is the set-point, once per row of its index. apart: in processes of their own, so that a point whose evaluation
    crashes is a failed row. SweepError for an unknown column, NaN, two columns that set one thing. The same bytes for any number of workers.
    """
    number = cores(workers)
    pieces = _pieces(len(points), number)
    if apart and pieces:
        tables = list(_evaluated(study, (partial(_cut, points, a, b) for a, b in pieces), number, None, True))
    elif len(pieces) <= 1 or number == 1:
        tables = [evaluate(study, points.iloc[a:b]) for a, b in pieces] or [evaluate(study, points)]
    else:
        from joblib import Parallel, delayed

        tables = Parallel(n_jobs=number, backend="threading")(delayed(evaluate)(study, points.iloc[a:b]) for a, b in pieces)
    return pd.concat(tables) if len(tables) > 1 else tables[0]


def in_order(
    study: Study, plan: Planned, starts: list[int], size: int, workers: int | None, apart: bool = False, note: Note | None = None
) -> Generator[tuple[int, pd.DataFrame], None, None]:
    """Yield (start, table) of stretches of a plan of `size` rows from each of `starts`, in that order.

    Close it where it is not read to its end: its processes end then. apart: in processes whatever the number of points; note: told of
    processes that ended. Only some tasks per worker are begun ahead, so that results never pile up.
    """
    number = cores(workers)
    apart = apart or sum(min(size, plan.size - start) for start in starts) >= PROCESSES_FROM
    step = TASK if apart else PIECE
    tasks = [(start, a, min(a + step, start + size, plan.size)) for start in starts for a in range(start, min(start + size, plan.size), step)]
    rows = (partial(plan.rows, a, b) for _, a, b in tasks)
    with contextlib.closing(_evaluated(study, rows, min(number, len(tasks)), note, apart)) as tables:
        yield from _joined(zip((start for start, _, _ in tasks), tables, strict=True), size, plan.size)


def _evaluated(study: Study, tasks: Iterator[Rows], number: int, note: Note | None, apart: bool) -> Generator[pd.DataFrame, None, None]:
    """Yield the table of each task in order, from processes (`apart`) or from threads."""
    if number <= 1 and not apart:
        yield from (evaluate_rows(study, rows()) for rows in tasks)
        return
    with contextlib.ExitStack() as stack:
        threads = ThreadPoolExecutor(max(number, 1))
        stack.callback(threads.shutdown, cancel_futures=True)
        work = stack.enter_context(Crew(study, note)).evaluate if apart else partial(evaluate_rows, study)
        begun: deque[Future[pd.DataFrame]] = deque()
        for rows in tasks:
            begun.append(threads.submit(work, rows()))
            if len(begun) >= AHEAD * number:
                yield begun.popleft().result()
        while begun:
            yield begun.popleft().result()


def _joined(results: Iterator[tuple[int, pd.DataFrame]], size: int, total: int) -> Iterator[tuple[int, pd.DataFrame]]:
    """Join pieces into whole stretches."""
    tables: list[pd.DataFrame] = []
    for start, table in results:
        tables.append(table)
        if sum(map(len, tables)) == min(size, total - start):
            yield start, pd.concat(tables) if len(tables) > 1 else tables[0]
            tables = []


