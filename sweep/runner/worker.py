"""A process that evaluates points for another: it reads a study and rows, answers with tables, and ends with its pipe.

It is the far side of `crew.py`. The messages are pickles on pipes that nobody else holds.
"""

import os
import pickle
import queue
import signal
import sys
import threading
import traceback
from typing import Any, BinaryIO

import pandas as pd

from sweep.plant import evaluate
from sweep.study.model import Study

PIECE = 4096  # points of one call: what a call costs beside its points is small, and what it touches is still some megabytes
IDLE = 300.0  # s without a task after which a worker ends by itself
READY = "ready"


def evaluate_rows(study: Study, rows: pd.DataFrame) -> pd.DataFrame:
    """Evaluate rows piece by piece; the pieces do not show in the result."""
    tables = [evaluate(study, rows.iloc[a : a + PIECE]) for a in range(0, len(rows), PIECE)]
    return pd.concat(tables) if len(tables) > 1 else tables[0]


def _listen(source: BinaryIO, tasks: "queue.SimpleQueue[Any]") -> None:
    """Hand on what comes in; when the other side is gone, end at once, whatever is being computed."""
    try:
        while True:
            tasks.put(pickle.load(source))
    except (EOFError, OSError, pickle.UnpicklingError):
        os._exit(0)


def _answer(study: Study, rows: pd.DataFrame) -> pd.DataFrame | Exception:
    """Return the table of rows, or what was raised, with the place where it was raised as a note."""
    try:
        return evaluate_rows(study, rows)
    except Exception as error:
        try:
            pickle.loads(pickle.dumps(error))
        except Exception:
            error = RuntimeError(f"{type(error).__name__}: {error}")
        error.add_note(traceback.format_exc())
        return error


def serve(source: BinaryIO, sink: BinaryIO) -> None:
    """Answer tasks (a study, where it is not that of the task before, and rows) until the other side is gone or nothing comes."""
    tasks: queue.SimpleQueue[Any] = queue.SimpleQueue()
    threading.Thread(target=_listen, args=(source, tasks), daemon=True).start()
    study: Study | None = None
    answer: object = READY
    while True:
        pickle.dump(answer, sink, protocol=pickle.HIGHEST_PROTOCOL)
        sink.flush()
        try:
            other, rows = tasks.get(timeout=IDLE)
        except queue.Empty:
            return
        study = other or study
        assert study is not None
        answer = _answer(study, rows)


def main() -> None:
    """Serve on standard input and output. Whatever else prints goes to standard error; Ctrl-C is the other side's to handle."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    sink = os.fdopen(os.dup(sys.stdout.fileno()), "wb")
    os.dup2(sys.stderr.fileno(), sys.stdout.fileno())
    try:
        serve(sys.stdin.buffer, sink)
    except BrokenPipeError:
        os._exit(0)
