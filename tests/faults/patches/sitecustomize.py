"""What some tests of faults change in the program's processes, from outside: Python imports this file first where it is on its path.

SWEEP_FAULT names the fault: `crash 4711 20000` ends the worker process that evaluates plan point 4711 or 20000 by SIGSEGV,
`crash-in-threads 3` does so in the main process too, `clock` lets the time of day go backwards. A number of rows to a file may follow a colon.
"""

import os
import signal
import sys
import time

_kind, *_which = os.environ.get("SWEEP_FAULT", "").split()


def _crash(points, everywhere):
    import sweep.plant

    evaluate, worker = sweep.plant.evaluate, any("sweep.runner.worker" in text for text in sys.orig_argv)

    def crashing(study, rows):
        if len(rows.columns) and (everywhere or worker) and points.intersection(rows.index):
            os.kill(os.getpid(), signal.SIGSEGV)
        return evaluate(study, rows)

    sweep.plant.evaluate = crashing


def _turn_clock_back():
    start, count = time.time(), iter(range(10**9))
    time.time = lambda: start - 60.0 * next(count)
    time.strftime = lambda form, *_: f"earlier by {next(count)} minutes"


if _kind == "clock":
    _turn_clock_back()
elif _kind.startswith("crash"):
    _crash({int(n) for n in _which}, _kind == "crash-in-threads")
