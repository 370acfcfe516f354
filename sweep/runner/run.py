"""The points of a plan, evaluated and stored; an interrupted run goes on where it stopped."""

import time

from sweep.runner.parallel import in_order
from sweep.runner.progress import Meter, Watcher
from sweep.runner.store import ROWS, Store


def sweep_points(store: Store, workers: int | None = None, watcher: Watcher | None = None) -> int:
    """Evaluate what a store lacks; return how many points were computed now."""
    missing = store.missing()
    size = store.plan.size
    lacking = sum(min(ROWS, size - start) for start in missing)
    meter = Meter(size, size - lacking, watcher)
    store.save()
    begun = time.monotonic()
    for start, table in in_order(store.study, store.plan, missing, ROWS, workers):
        store.add_points(start, table)
        meter.add(len(table))
        store.log(what="points", start=start, rows=len(table), seconds=round(time.monotonic() - begun, 3))
    return lacking
