"""Tasks in flight on a cluster: how large, how many, and what is done about one that kills its workers.

A task whose worker dies is given to another one by the scheduler. One that killed every worker it was given to is set aside, and at the end
taken apart, with nothing else in flight, until the point that does it is found: that point, alone and more than once, is a failed row.
"""

from __future__ import annotations

import contextlib
import pickle
import queue
import time
import uuid
from collections import Counter, deque
from collections.abc import Callable, Generator, Iterable, Iterator
from typing import TYPE_CHECKING

import pandas as pd

from sweep.base.errors import SurroundingsError
from sweep.plan import Planned
from sweep.plant import crashed
from sweep.runner import remote
from sweep.study.model import Study

if TYPE_CHECKING:
    from distributed import Client, Future

LARGEST, SMALLEST = 2048, 128  # points of a task
PER_THREAD = 4  # tasks that are in flight for each thread of the workers, and that even a small plan is cut into
PARTS = 8  # smaller pieces that the rows of a deadly task are cut into
ALONE = 2  # workers that a point has to kill, alone, before it is blamed: a single one may have died by chance, where the scheduler allows no failure
GUILTY = 16  # points that may kill their workers; a program or a cluster that does so more often is not to be trusted with the rest
STAYS = "the points that are done stay; the same command, with or without --cluster, goes on where it stopped"
Stretch = tuple[int, int]
Teller = Callable[[str], None]
Note = Callable[..., None]


class Watch:
    """Who works for a scheduler, asked at most once a second: newcomers are greeted, and nobody waits for ever where there is none."""

    def __init__(self, client: Client, address: str, patience: float, greet: Callable[[set[str]], set[str]]) -> None:
        """greet: compares workers, by address, with this machine; returns those that answered, SurroundingsError where one differs."""
        self.client, self.address, self.patience, self.greet = client, address, patience, greet
        self.threads, self.workers = 0, 0
        self._known: set[str] = set()
        self._asked, self._alone = 0.0, time.monotonic()

    def wait(self) -> None:
        """Wait for a first worker."""
        self.look()
        while not self.threads:
            time.sleep(0.2)
            self.look()

    def look(self, suspects: Iterable[Stretch] = ()) -> None:
        """Count; SurroundingsError where there has been no worker for too long. suspects: the tasks that may have killed them."""
        now = time.monotonic()
        if self.threads and now - self._asked < 1.0:
            return
        if self.client.status != "running":
            raise ConnectionError("the connection to its scheduler was lost")
        before, self._asked = self.threads, now
        found = self.client.nthreads(callback_timeout=self.patience)
        self.workers, self.threads = len(found), sum(found.values())
        if newcomers := set(found) - self._known:
            self._known |= self.greet(newcomers)
        if self.threads or before:
            self._alone = now
        if now - self._alone > self.patience:
            doubt = f"; under suspicion of having killed them: {named(suspects)}" if suspects else ""
            raise SurroundingsError(f"the cluster at {self.address} has had no worker for {self.patience:.0f} s{doubt}; {STAYS}")


class Dispatch:
    """The tasks of one plan on the workers of one scheduler."""

    def __init__(self, client: Client, watch: Watch, killed: type[Exception], study: Study, plan: Planned, say: Teller, note: Note) -> None:
        """killed: what the scheduler raises for a task whose workers all died."""
        self.client, self.watch, self.killed, self.study, self.plan, self.say, self.note = client, watch, killed, study, plan, say, note
        self.packed, self.expected, self.run = pickle.dumps(study, protocol=5), remote.depends_on(), uuid.uuid4().hex
        self.flying: dict[str, tuple[Future[pd.DataFrame], Stretch]] = {}
        self.landed: queue.SimpleQueue[str] = queue.SimpleQueue()
        self.suspects: deque[Stretch] = deque()
        self.guilty: list[int] = []
        self.deaths: Counter[Stretch] = Counter()  # workers that died of each task, in the hunt that is on
        self.sent = 0

    @property
    def window(self) -> int:
        """How many tasks may be in flight; the rest of the plan waits here, as numbers to be."""
        return PER_THREAD * max(self.watch.threads, 1)

    def tables(self, starts: list[int], size: int) -> Generator[tuple[int, pd.DataFrame], None, None]:
        """Yield (first row, table) of all rows of the stretches, in pieces, as they are done."""
        tasks = cut(starts, size, self.plan.size, self.watch.threads)
        try:
            while True:
                while len(self.flying) < self.window and len(self.suspects) < self.window and (task := next(tasks, None)) is not None:
                    self._send(task)
                if self.flying:
                    yield from self._landing(self.suspects)
                elif self.suspects:
                    yield from self._hunt(self.suspects.popleft())
                else:
                    return
        finally:
            if self.client.status == "running":  # else there is nobody who would answer
                with contextlib.suppress(Exception):
                    self.client.cancel([future for future, _ in self.flying.values()], force=True)

    def _send(self, task: Stretch) -> None:
        """Submit a task under a name of its own: the scheduler remembers the dead by name."""
        key = f"points-{self.run}-{task[0]}-{task[1]}-{self.sent}"
        self.sent += 1
        future = self.client.submit(remote.work, self.packed, self.expected, self.plan.rows(*task), key=key, pure=False)
        self.flying[key] = future, task
        future.add_done_callback(lambda done: self.landed.put(done.key))

    def _landing(self, deadly: deque[Stretch]) -> Iterator[tuple[int, pd.DataFrame]]:
        """Yield the table of a task that is done, if one is within a second; a task that killed its workers is added to `deadly`."""
        self.watch.look([*deadly, *(task for _, task in self.flying.values())])
        try:
            key = self.landed.get(timeout=1.0)
        except queue.Empty:
            return
        future, task = self.flying[key]
        try:
            table = future.result(timeout=self.watch.patience)
        except self.killed as error:
            died = 1 + int(getattr(error, "allowed_failures", 0))
            self.note(what="workers died", start=task[0], rows=task[1] - task[0], workers=died)
            self.deaths[task] += died
            deadly.append(task)
        except TimeoutError:
            self.landed.put(key)  # its worker died after it was done: it is being done again
            return
        else:
            yield task[0], table
        del self.flying[key]

    def _hunt(self, suspect: Stretch) -> Iterator[tuple[int, pd.DataFrame]]:
        """Yield the tables of a deadly task, taken apart with nothing else in flight; its deadly points as failed rows."""
        self.say(f"plan {named([suspect])} killed the workers that they were given to; looking for the point that does")
        left = deque(_parts(suspect))
        self.deaths.clear()  # in company, a task is charged with its neighbours' deaths
        while left:
            deadly: deque[Stretch] = deque()
            self._send(left.popleft())
            while self.flying:
                yield from self._landing(deadly)
            for task in deadly:
                if task[1] - task[0] > 1:
                    left.extendleft(reversed(_parts(task)))
                elif self.deaths[task] < ALONE:
                    left.appendleft(task)
                else:
                    yield task[0], self._given_up(task)

    def _given_up(self, task: Stretch) -> pd.DataFrame:
        """Return the failed row of a point that kills its workers; SurroundingsError where there are too many."""
        self.guilty.append(task[0])
        self.note(what="point given up", start=task[0])
        self.say(f"plan {named([task])} kills every worker that it is given to: given up, a failed row")
        if len(self.guilty) > GUILTY:
            raise SurroundingsError(
                f"more than {GUILTY} points kill every worker that they are given to (plan rows {', '.join(map(str, self.guilty))}): look at the "
                f"workers' logs and memory first; {STAYS}"
            )
        return crashed(self.study, self.plan.rows(*task))


def cut(starts: list[int], size: int, total: int, threads: int) -> Iterator[Stretch]:
    """Yield from where to where each task goes: none so small that its journey counts, none so long that its loss does."""
    lacking = sum(min(size, total - start) for start in starts)
    share = -(-lacking // (PER_THREAD * max(threads, 1)))
    step = min(LARGEST, -(-share // SMALLEST) * SMALLEST)
    for start in starts:
        stop = min(start + size, total)
        for a in range(start, stop, step):
            yield a, min(a + step, stop)


def _parts(task: Stretch) -> list[Stretch]:
    a, b = task
    size = -(-(b - a) // PARTS)
    return [(k, min(k + size, b)) for k in range(a, b, size)]


def named(tasks: Iterable[Stretch]) -> str:
    """Return plan rows in words: row 7; rows 0 to 127, 256 to 383."""
    spans = [f"{a}" if b - a == 1 else f"{a} to {b - 1}" for a, b in sorted(tasks)]
    return f"{'row' if len(spans) == 1 and ' ' not in spans[0] else 'rows'} {', '.join(spans[:8])}{', ...' if len(spans) > 8 else ''}"


def whole(pieces: Iterable[tuple[int, pd.DataFrame]], starts: list[int], size: int, total: int) -> Iterator[tuple[int, pd.DataFrame]]:
    """Join pieces, in whatever order they come, into whole stretches."""
    first = {start // size: start for start in starts}
    held: dict[int, dict[int, pd.DataFrame]] = {}
    for a, table in pieces:
        start = first[a // size]
        have = held.setdefault(start, {})
        have[a] = table
        if sum(map(len, have.values())) == min(size, total - start):
            del held[start]
            tables = [have[k] for k in sorted(have)]
            yield start, pd.concat(tables) if len(tables) > 1 else tables[0]
