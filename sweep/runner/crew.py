"""Worker processes, and what is done when one of them dies: no point is lost, and one whose evaluation crashes is named.

Each worker has one task at a time, so that a death tells which rows it was about. Rows that crashed their worker are evaluated again in
smaller pieces, down to the point that does it; alone and twice, it becomes a failed row. A worker that was killed from outside (by a
user, for want of memory) says nothing about its rows: they are evaluated again as they were.
"""

import atexit
import contextlib
import os
import pickle
import signal
import subprocess
import sys
import threading
from collections.abc import Iterator
from types import TracebackType
from typing import Protocol

import pandas as pd

from sweep.base.errors import SurroundingsError
from sweep.plant import crashed
from sweep.runner.worker import READY
from sweep.study.model import Study

PARTS = 16  # smaller pieces that rows are cut into after a crash
OUTSIDE = 5  # times in a row that a task's worker may be killed from outside, or not start
CRASHES = 200  # of one call; a machine that crashes more often is not to be trusted with the rest
_CODE = "import sys; sys.path[:] = {path!r}; from sweep.runner.worker import main; main()"
_SINGLE = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "NUMBA_NUM_THREADS")
_KILLS = {-int(getattr(signal, name)) for name in ("SIGKILL", "SIGTERM", "SIGHUP", "SIGINT", "SIGPIPE") if hasattr(signal, name)}


class Note(Protocol):
    """Told what belongs in the log."""

    def __call__(self, **entry: object) -> None:
        """Take a line of the log."""


class _DiedError(Exception):
    """A worker ended before it had answered."""


class _Worker:
    """One process, asked by one thread at a time."""

    def __init__(self) -> None:
        path = [os.path.abspath(place) for place in sys.path]  # the same program, wherever it was found
        with _undisturbed():
            self.process = subprocess.Popen(
                [sys.executable, "-P", "-c", _CODE.format(path=path)], stdin=subprocess.PIPE, stdout=subprocess.PIPE,
                env={**os.environ, **dict.fromkeys(_SINGLE, "1")}, creationflags=getattr(subprocess, "CREATE_NEW_PROCESS_GROUP", 0),
            )  # fmt: skip
        self.ready = False
        self.study: Study | None = None

    def ask(self, study: Study, rows: pd.DataFrame) -> pd.DataFrame:
        """Return the table of rows; _DiedError where the process ended instead, or what the evaluation raised."""
        sink, source = self.process.stdin, self.process.stdout
        assert sink is not None and source is not None
        try:
            self.ready = self.ready or pickle.load(source) == READY
            pickle.dump((None if study is self.study else study, rows), sink, protocol=pickle.HIGHEST_PROTOCOL)
            sink.flush()
            answer: pd.DataFrame | Exception = pickle.load(source)
        except (EOFError, OSError, ValueError, pickle.UnpicklingError):
            raise _DiedError from None
        self.study = study
        if isinstance(answer, Exception):
            raise answer
        return answer

    def blamed(self) -> bool:
        """Tell whether the process, which has died, was ended by its own work: not from outside, nor before it had begun."""
        return self.ready and self.end() != 0 and self.end() not in _KILLS

    def end(self) -> int:
        """Return the status of the process; one that still lives is killed."""
        with contextlib.suppress(subprocess.TimeoutExpired):
            self.process.wait(0.2)  # one that has closed its pipe is about to end
        self.process.kill()
        status = self.process.wait()
        for pipe in (self.process.stdin, self.process.stdout):
            if pipe is not None:
                with contextlib.suppress(OSError):  # what was not sent to a dead process
                    pipe.close()
        return status

    @property
    def ended_by(self) -> str:
        """Return how the process ended, in words."""
        status = self.end()
        names = {-number: number.name for number in signal.Signals}
        return names.get(status, f"exit status {status}")


@contextlib.contextmanager
def _undisturbed() -> Iterator[None]:
    """Have a process start with Ctrl-C held back, which it inherits: it is the parent that answers to it."""
    if not hasattr(signal, "pthread_sigmask"):
        yield
        return
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


_spare: list[_Worker] = []  # warm and without a task, for the next call
_guard = threading.Lock()


@atexit.register
def _dismiss() -> None:
    """End the workers that wait for a next call."""
    with _guard:
        while _spare:
            worker = _spare.pop()
            worker.process.kill()
            worker.end()


class Crew:
    """The workers of one call, as many as threads ask for at once. A context: if it ends by an exception, they are ended too."""

    def __init__(self, study: Study, note: Note | None = None) -> None:
        self.study, self.note = study, note
        self._busy: set[_Worker] = set()
        self._closed, self._crashes = False, 0

    def __enter__(self) -> "Crew":
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None) -> None:
        with _guard:
            self._closed = True
            for worker in self._busy:
                worker.process.kill()

    def evaluate(self, rows: pd.DataFrame) -> pd.DataFrame:
        """Return the table of rows, points whose evaluation crashes as failed rows; SurroundingsError where workers do not live."""
        table = self._tried(rows)
        if table is None and len(rows) == 1:
            table = self._tried(rows)  # alone and once more, before the point is blamed
            return crashed(self.study, rows) if table is None else table
        if table is None:
            size = -(-len(rows) // PARTS)
            table = pd.concat([self.evaluate(rows.iloc[a : a + size]) for a in range(0, len(rows), size)])
        return table

    def _tried(self, rows: pd.DataFrame) -> pd.DataFrame | None:
        """Return the table of rows, or None where their evaluation crashed its worker."""
        how = ""
        for _ in range(OUTSIDE):
            worker = self._taken()
            try:
                table = worker.ask(self.study, rows)
            except _DiedError:
                blamed, how = self._buried(worker, rows)
                if blamed:
                    return None
            except BaseException:
                self._given_back(worker)
                raise
            else:
                self._given_back(worker)
                return table
        raise SurroundingsError(
            f"worker processes do not live: {OUTSIDE} in a row ended before they had answered, the last by {how} (too little memory, or killed "
            "by hand?); the points that are done stay"
        )

    def _taken(self) -> _Worker:
        with _guard:
            if self._closed:
                raise SurroundingsError("the run was stopped")
            worker = _spare.pop() if _spare else _Worker()
            self._busy.add(worker)
            return worker

    def _given_back(self, worker: _Worker) -> None:
        with _guard:
            self._busy.discard(worker)
            if not self._closed:
                _spare.append(worker)
        if self._closed:
            worker.process.kill()
            worker.end()

    def _buried(self, worker: _Worker, rows: pd.DataFrame) -> tuple[bool, str]:
        """Note a death; return whether the work is to blame for it, and how the worker ended."""
        with _guard:
            self._busy.discard(worker)
        blamed, how = worker.blamed(), worker.ended_by
        with _guard:
            self._crashes += blamed
            if self._closed:
                raise SurroundingsError("the run was stopped")
            if self._crashes > CRASHES:
                raise SurroundingsError(f"worker processes crashed more than {CRASHES} times (the last by {how}); the points that are done stay")
            if self.note is not None:
                self.note(what="worker ended", how=how, start=str(rows.index[0]), rows=len(rows), worker=worker.process.pid)
        return blamed, how
