"""Points on all cores: pieces of a table, evaluated by threads or by processes, in their order.

The march runs outside Python's lock, so threads share one compiled kernel and nothing is copied; processes are for long plans, where
their start-up is small and a crash costs one piece.
"""

import os
from collections.abc import Iterator

import pandas as pd

from sweep.base.errors import SweepError
from sweep.plan import Planned
from sweep.plant import evaluate
from sweep.study.model import Study

PIECE = 4096  # points of one call: what a call costs beside its points is small, and what it touches is still some megabytes
TASK, WAVE = 4096, 8  # points that a worker process takes at a time; tasks per worker before all wait for the last of them
PROCESSES_FROM = 32_768  # points; below, threads are done before processes have started


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


def simulate(study: Study, points: pd.DataFrame, workers: int | None = None) -> pd.DataFrame:
    """Return inputs and responses of points (a column per variable or dotted path, SI), same index.

    A frame without columns is the set-point, once per row of its index. SweepError for an unknown column, NaN, two columns that set one
    thing. The same bytes for any number of workers.
    """
    number = cores(workers)
    pieces = _pieces(len(points), number)
    if len(pieces) <= 1 or number == 1:
        tables = [evaluate(study, points.iloc[a:b]) for a, b in pieces] or [evaluate(study, points)]
    else:
        from joblib import Parallel, delayed

        tables = Parallel(n_jobs=number, backend="threading")(delayed(evaluate)(study, points.iloc[a:b]) for a, b in pieces)
    return pd.concat(tables) if len(tables) > 1 else tables[0]


def _evaluate_task(study: Study, rows: pd.DataFrame) -> pd.DataFrame:
    """Evaluate the pieces of a task in a worker."""
    tables = [evaluate(study, rows.iloc[a : a + PIECE]) for a in range(0, len(rows), PIECE)]
    return pd.concat(tables) if len(tables) > 1 else tables[0]


def in_order(study: Study, plan: Planned, starts: list[int], size: int, workers: int | None) -> Iterator[tuple[int, pd.DataFrame]]:
    """Yield (start, table) of stretches of a plan of `size` rows from each of `starts`, in that order.

    Stretches are evaluated in waves of some tasks per worker, so that results never pile up.
    """
    from joblib import Parallel, delayed

    number = cores(workers)
    total = sum(min(size, plan.size - start) for start in starts)
    processes = total >= PROCESSES_FROM
    step = TASK if processes else PIECE
    tasks = [(start, a, min(a + step, start + size, plan.size)) for start in starts for a in range(start, min(start + size, plan.size), step)]
    if number == 1 or len(tasks) == 1:
        yield from _joined(((start, _evaluate_task(study, plan.rows(a, b))) for start, a, b in tasks), size, plan.size)
        return
    with Parallel(n_jobs=number, backend="loky" if processes else "threading", return_as="generator", max_nbytes=None) as parallel:

        def results() -> Iterator[tuple[int, pd.DataFrame]]:
            for wave in (tasks[k : k + WAVE * number] for k in range(0, len(tasks), WAVE * number)):
                tables = parallel(delayed(_evaluate_task)(study, plan.rows(a, b)) for _, a, b in wave)
                yield from zip((start for start, _, _ in wave), tables, strict=True)

        yield from _joined(results(), size, plan.size)


def _joined(results: Iterator[tuple[int, pd.DataFrame]], size: int, total: int) -> Iterator[tuple[int, pd.DataFrame]]:
    """Join pieces into whole stretches."""
    tables: list[pd.DataFrame] = []
    for start, table in results:
        tables.append(table)
        if sum(map(len, tables)) == min(size, total - start):
            yield start, pd.concat(tables) if len(tables) > 1 else tables[0]
            tables = []


