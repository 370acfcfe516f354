"""One run at a time in a results folder. The operating system holds the lock and lets it go when its process ends, however it ends;
the file says in words who works there."""

import contextlib
import errno
import json
import os
import socket
import sys
from pathlib import Path
from typing import Any

from sweep.base.errors import SurroundingsError

NAME = ".lock"
_FAR = 1 << 30  # where Windows locks a byte: far behind what is written


class Lock:
    """The lock of a folder. stale: after `take`, whether a run that held it before ended without a word (killed, crashed, power cut)."""

    def __init__(self, folder: Path) -> None:
        self.path = folder / NAME
        self.stale = False
        self._handle: int | None = None

    def take(self) -> None:
        """Take the lock, making the folder; SurroundingsError where another run holds it or the folder cannot be written."""
        try:
            self.path.parent.mkdir(parents=True, exist_ok=True)
            while not self._took():
                pass
        except OSError as error:
            self._drop()
            raise SurroundingsError(f"{self.path.parent} cannot be written: {error.strerror or error}") from None

    def _took(self) -> bool:
        """Tell whether the lock is held now; False where its file was exchanged meanwhile. SurroundingsError where another run holds it."""
        self._handle = os.open(self.path, os.O_RDWR | os.O_CREAT | getattr(os, "O_CLOEXEC", 0), 0o666)
        sure = self._locked(self._handle)
        owner = _owner(self._handle)
        if sure is False or (owner and not _gone(owner, sure is None)):
            self._drop()
            raise SurroundingsError(self._in_use(owner))
        if not _same(self._handle, self.path):
            self._drop()
            return False
        self.stale = owner is not None
        mine = {"host": socket.gethostname(), "process": os.getpid(), "started": _started(os.getpid())}
        os.ftruncate(self._handle, 0)
        os.pwrite(self._handle, json.dumps(mine).encode(), 0) if hasattr(os, "pwrite") else os.write(self._handle, json.dumps(mine).encode())
        os.fsync(self._handle)
        return True

    @staticmethod
    def _locked(handle: int) -> bool | None:
        """Tell whether the system gives the lock; None where this file system knows no locks."""
        try:
            if sys.platform == "win32":
                import msvcrt

                os.lseek(handle, _FAR, os.SEEK_SET)
                msvcrt.locking(handle, msvcrt.LK_NBLCK, 1)
                os.lseek(handle, 0, os.SEEK_SET)
            else:
                import fcntl

                fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError as error:
            return False if error.errno in (errno.EWOULDBLOCK, errno.EACCES, errno.EDEADLK) else None
        return True

    def _in_use(self, owner: dict[str, Any] | None) -> str:
        by = f"process {owner.get('process')} on {owner.get('host')}" if owner else "another run"
        elsewhere = owner is not None and owner.get("host") != socket.gethostname()
        more = f"; if it is known to have ended there, remove {self.path}" if elsewhere else ""
        return f"{self.path.parent} is in use by {by}; wait for it, or choose another --out{more}"

    def let_go(self) -> None:
        """Let the lock go."""
        if self._handle is not None:
            if sys.platform == "win32":  # which removes no file that is open
                self._drop()
            with contextlib.suppress(OSError):
                self.path.unlink(missing_ok=True)
            self._drop()

    def _drop(self) -> None:
        if self._handle is not None:
            os.close(self._handle)
            self._handle = None


def _owner(handle: int) -> dict[str, Any] | None:
    """Return what a lock says of its owner, {} where that cannot be read, None where nothing is written yet."""
    os.lseek(handle, 0, os.SEEK_SET)
    text = os.read(handle, 4096)
    try:
        owner = json.loads(text)
        return owner if isinstance(owner, dict) else {}
    except ValueError:
        return {} if text else None


def _gone(owner: dict[str, Any], unsure: bool) -> bool:
    """Tell whether the owner is no more; the system's lock says so for this machine, if it is `unsure` the number and start of the process."""
    if owner.get("host") != socket.gethostname():
        return False
    if not unsure:
        return True
    process = owner.get("process")
    alive = _started(process) if isinstance(process, int) and process > 0 else None
    return alive is None or alive != owner.get("started")


def _same(handle: int, path: Path) -> bool:
    """Tell whether a path still leads to an open file."""
    try:
        return os.path.samestat(os.fstat(handle), os.stat(path))
    except OSError:
        return False


def _started(process: int) -> str | None:
    """Return when a process started, so that a number used again is not taken for it; None where it is gone."""
    if sys.platform.startswith("linux"):
        try:
            return Path(f"/proc/{process}/stat").read_text().rpartition(")")[2].split()[19]
        except (OSError, IndexError):
            return None
    if sys.platform == "win32":
        return "alive"  # where a signal zero would end it
    try:
        os.kill(process, 0)
    except PermissionError:
        return "alive"
    except (OSError, OverflowError):
        return None
    return "alive"
