"""A fuzzer that keeps what leads somewhere new: texts are changed at random, and one that reaches a line after another as none before did
becomes a text to change further. What is watched are the modules that read a study; what is forbidden is a hook that cannot be taken off.

Run as a module: `python -m tests.study.guided SECONDS SEED` (a process of its own: the hook stays).
"""

import random
import re
import sys
import time
from pathlib import Path

from sweep.base.errors import StudyError, SweepError
from sweep.plan import planned
from sweep.study import read_text
from sweep.workflow.check import told
from tests.study.test_fuzz import PIECES, SIGNS, TEXT, read_anything
from tests.texts import SMALL

SLOWEST = 4.0  # s for one text
_WATCHED = tuple(str(Path(sys.modules["sweep"].__file__).parent / part) for part in ("study", "base", "plan"))
_FORBIDDEN = ("os.system", "os.exec", "os.posix_spawn", "os.spawn", "subprocess.Popen", "socket.connect", "socket.bind", "exec", "compile",
              "os.remove", "os.rename", "os.mkdir", "shutil", "ctypes.dlopen")  # fmt: skip


class Forbidden(BaseException):
    """Reading a text did what reading must not do."""


def forbid() -> None:
    """From here on nothing may be run, written, removed or sent, by whatever is imported."""

    def hook(event: str, arguments: tuple[object, ...]) -> None:
        if event.startswith(_FORBIDDEN):
            raise Forbidden(f"{event} {arguments!r:.200}")
        if event == "open" and isinstance(arguments[1], str) and set(arguments[1]) & set("wax+"):
            raise Forbidden(f"{event} {arguments!r:.200}")

    sys.addaudithook(hook)


class Trace:
    """Which line followed which, in the modules that are watched."""

    def __init__(self) -> None:
        self.seen: set[tuple[str, int, int]] = set()
        self.new = False

    def __call__(self, frame, event, argument):
        if not frame.f_code.co_filename.startswith(_WATCHED):
            return None
        before = 0

        def line(frame, event, argument):
            nonlocal before
            step = (frame.f_code.co_filename, before, frame.f_lineno)
            if step not in self.seen:
                self.seen.add(step)
                self.new = True
            before = frame.f_lineno
            return line

        return line

    def of(self, text: str) -> bool:
        """Read a text; tell whether it led somewhere new."""
        self.new = False
        sys.settrace(self)
        try:
            read_anything(text)
        finally:
            sys.settrace(None)
        return self.new


def changed(draw: random.Random, text: str, other: str) -> str:
    """Return a text with a change or two: signs, pieces of another text, lines that change places."""
    for _ in range(draw.randint(1, 3)):
        place, kind = draw.randrange(len(text) + 1), draw.randrange(5)
        if kind == 0:
            text = text[:place] + draw.choice(SIGNS) + text[place + draw.randrange(6) :]
        elif kind == 1:
            spans = [m.span() for m in re.finditer(r'"[^"\n]*"|[\w.+-]+', text)] or [(0, 0)]
            start, end = draw.choice(spans)
            text = text[:start] + draw.choice(PIECES) + text[end:]
        elif kind == 2:
            lines, more = text.split("\n"), other.split("\n")
            k, m = draw.randrange(len(lines)), draw.randrange(len(more))
            lines[k : k + draw.randrange(3)] = more[m : m + draw.randint(1, 6)]
            text = "\n".join(lines)
        elif kind == 3:
            text = text[:place] + text[place + draw.randrange(80) :]
        else:
            start = draw.randrange(len(other) + 1)
            text = text[:place] + other[start : start + draw.randrange(60)] + text[place:]
    return text[:20_000]


def fuzz(seconds: float, seed: int) -> tuple[int, int, int]:
    """Fuzz for some seconds; return how many texts were read, how many were kept, how many steps were seen."""
    starter = (Path(sys.modules["sweep"].__file__).parent / "workflow" / "starter.toml").read_text()
    draw, trace, kept, count = random.Random(seed), Trace(), [TEXT, SMALL, starter], 0
    for text in kept:
        told(read_text(text))  # what is imported late is imported now
        trace.of(text)
    forbid()
    until = time.monotonic() + seconds
    while time.monotonic() < until:
        text = changed(draw, draw.choice(kept), draw.choice(kept))
        begun = time.process_time()
        try:
            new = trace.of(text)
            read = read_text(text)
            if read.plan is None or read.plan.kind != "list":
                planned(read), told(read)
        except StudyError:
            pass
        except SweepError as error:
            assert str(error)
        except BaseException:
            sys.stderr.write(text)
            raise
        assert time.process_time() - begun < 2.0 * SLOWEST, text
        count += 1
        if new:
            kept.append(text)
    return count, len(kept), len(trace.seen)


if __name__ == "__main__":
    sys.stdout.write(" ".join(map(str, fuzz(float(sys.argv[1]), int(sys.argv[2])))))
