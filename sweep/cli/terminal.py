"""What is printed where: results on standard output, notes, progress and errors on standard error."""

import contextlib
import os
import sys
import time
import unicodedata
from collections.abc import Iterator
from typing import TYPE_CHECKING, TextIO

from sweep.base.errors import SurroundingsError, one_line

if TYPE_CHECKING:
    from sweep.runner import Progress
    from sweep.study.model import Study

_EVERY = 0.2  # s between two states of the line of progress on a terminal
_PLAIN_EVERY = 10.0  # s between two plain lines elsewhere


def printable(text: str) -> str:
    """Return a text without control characters, so that a name in a study cannot steer the terminal."""
    return "".join(c if c in "\n\t" or unicodedata.category(c)[0] != "C" else "\N{REPLACEMENT CHARACTER}" for c in text)


def duration(seconds: float) -> str:
    """Return a time in the unit that reads well: 12 s, 3.4 min, 5.6 h."""
    for size, unit in ((86_400.0, "d"), (3600.0, "h"), (60.0, "min")):
        if seconds >= 2.0 * size:
            return f"{seconds / size:.3g} {unit}"
    return f"{seconds:.3g} s"


class Terminal:
    """Prints; keeps a line of progress on a terminal, plain lines elsewhere."""

    def __init__(self, quiet: bool = False) -> None:
        self.quiet, self._line, self._last = quiet, False, 0.0
        for stream in (sys.stdout, sys.stderr):
            if hasattr(stream, "reconfigure"):
                stream.reconfigure(errors="replace")

    def line(self, text: str) -> None:
        """Print a result."""
        self._clear()
        with self._results():
            print(printable(text))

    def title(self, text: str) -> None:
        """Print what a result is about."""
        self.line(one_line(text))

    def heading(self, text: str) -> None:
        """Print a heading."""
        self.line(f"\n{one_line(text)}")

    def item(self, text: str) -> None:
        """Print a line of a list."""
        self.line(f"  {one_line(text)}")

    def note(self, text: str) -> None:
        """Say what is being done."""
        if not self.quiet:
            self.error(text)

    def error(self, text: str) -> None:
        """Say what is wrong."""
        self._clear()
        self._say(printable(text) + "\n")

    def warnings(self, study: "Study") -> None:
        """Print what is legal but doubtful."""
        for warning in study.warnings if not self.quiet else ():
            self.error(f"warning: {warning}\n")

    def compiling(self) -> None:
        """Say so where the integrator has to be compiled first."""
        from sweep.kernel import needs_compiling

        if needs_compiling():
            self.note("compiling the integrator, once per installation (some 20 s)")

    def progress(self, now: "Progress") -> None:
        """Show how far the points are."""
        finished, wait = now.done >= now.total, _EVERY if sys.stderr.isatty() else _PLAIN_EVERY
        if self.quiet or (time.monotonic() - self._last < wait and not finished):
            return
        self._last = time.monotonic()
        left = f", {duration(now.left)} left" if now.left is not None and not finished else ""
        text = f"{now.done:,} of {now.total:,} points, {now.rate:,.0f} points/s{left}"
        if sys.stderr.isatty() and not finished:
            self._say(f"\r\x1b[K{text}")
            self._line = True
        else:
            self.note(text)

    def _clear(self) -> None:
        if self._line:
            self._say("\r\x1b[K")
            self._line = False

    def _say(self, text: str) -> None:
        """Write to standard error; where nobody reads it any more, work goes on unseen."""
        try:
            sys.stderr.write(text)
            sys.stderr.flush()
        except OSError:
            self.quiet = True
            _abandon(sys.stderr)

    @contextlib.contextmanager
    def _results(self) -> Iterator[None]:
        try:
            yield
        except OSError as error:
            _abandon(sys.stdout)
            raise SurroundingsError(f"standard output cannot be written: {error.strerror or error}; what is in the results folder stays") from None

    def close(self) -> None:
        """Leave the terminal clean and bring out all that was printed; SurroundingsError where that cannot be written."""
        self._clear()
        with self._results():
            sys.stdout.flush()


def _abandon(stream: TextIO) -> None:
    """Lead a stream that cannot be written to nowhere, so that what it still holds does not fail again when the program ends."""
    with contextlib.suppress(OSError, ValueError):
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, stream.fileno())
        os.close(nowhere)
