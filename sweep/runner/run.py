"""The points of a plan, evaluated and stored; an interrupted run goes on where it stopped."""

import contextlib
import time

from sweep.runner.parallel import in_order
from sweep.runner.progress import Meter, Watcher
from sweep.runner.store import ROWS, Store


def sweep_points(store: Store, workers: int | None = None, watcher: Watcher | None = None) -> int:
    """Evaluate what a store lacks; return how many points were computed now.

    Where the run before ended without a word, whatever ended it may be in a point: each is then evaluated in a process that may crash.
    """
    missing = store.missing()
    size = store.plan.size
    lacking = sum(min(ROWS, size - start) for start in missing)
    meter = Meter(size, size - lacking, watcher)
    store.save()
    begun = time.monotonic()
    with contextlib.closing(in_order(store.study, store.plan, missing, ROWS, workers, store.broke_off, store.log)) as tables:
        for start, table in tables:
            store.add_points(start, table)
            meter.add(len(table))
            store.log(what="points", start=start, rows=len(table), seconds=round(time.monotonic() - begun, 3))
    return lacking
