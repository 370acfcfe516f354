"""How far a run is: a value the terminal may show; nothing here prints."""

import time
from collections.abc import Callable
from dataclasses import dataclass


@dataclass(frozen=True)
class Progress:
    """done and total points; rate (points/s) of this run; left: seconds to go, None where unknown."""

    done: int
    total: int
    rate: float
    left: float | None


Watcher = Callable[[Progress], None]


class Meter:
    """Counts points and tells a watcher."""

    def __init__(self, total: int, done: int, watcher: Watcher | None) -> None:
        self.total, self.done, self.before, self.watcher = total, done, done, watcher
        self.start = time.monotonic()

    def add(self, points: int) -> None:
        """Count points that are done."""
        self.done += points
        spent = time.monotonic() - self.start
        rate = (self.done - self.before) / spent if spent > 0.0 else 0.0
        left = (self.total - self.done) / rate if rate > 0.0 else None
        if self.watcher is not None:
            self.watcher(Progress(self.done, self.total, rate, left))
