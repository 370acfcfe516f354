"""What some tests of faults change in the program's processes, from outside: Python imports this file first where it is on its path.

SWEEP_FAULT names the fault: `crash 4711 20000` ends the worker process that evaluates plan point 4711 or 20000 by SIGSEGV,
`crash-everywhere 330.25` ends any process that evaluates a point with that value in its last column, `clock` lets the time of day go backwards,
`slow 0.4` has each task of a worker process take so many seconds more, so that a run can be hurt while it works, however fast the machine.
"""

import os
import signal
import sys
import time

_kind, *_which = os.environ.get("SWEEP_FAULT", "").split()


def _crash_where(guilty):
    import sweep.plant

    evaluate = sweep.plant.evaluate

    def crashing(study, rows):
        if len(rows.columns) and guilty(rows):
            os.kill(os.getpid(), signal.SIGSEGV)
        return evaluate(study, rows)

    sweep.plant.evaluate = crashing


def _wait_before(seconds):
    import sweep.plant

    evaluate = sweep.plant.evaluate

    def slow(study, rows):
        time.sleep(seconds)
        return evaluate(study, rows)

    sweep.plant.evaluate = slow


def _turn_clock_back():
    start, count = time.time(), iter(range(10**9))
    time.time = lambda: start - 60.0 * next(count)
    time.strftime = lambda form, *_: f"earlier by {next(count)} minutes"


if _kind == "clock":
    _turn_clock_back()
elif _kind == "crash" and any("sweep.runner.worker" in text for text in sys.orig_argv):
    _crash_where(lambda rows: not rows.index.intersection([int(n) for n in _which]).empty)
elif _kind == "slow" and any("sweep.runner.worker" in text for text in sys.orig_argv):
    _wait_before(float(_which[0]))
elif _kind == "crash-everywhere":
    _crash_where(lambda rows: (abs(rows.iloc[:, -1] - float(_which[0])) < 1e-9).any())
