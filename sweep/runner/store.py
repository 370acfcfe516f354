"""A results folder: what is done, under which study, with digests; one run at a time; nothing half-written.

Files are appended and never edited: a temporary dot name, fsync, rename, then their digest in the manifest.
"""

import json
import os
import platform
import socket
import sys
import time
from collections.abc import Iterator
from importlib.metadata import version
from pathlib import Path
from typing import Any

import pandas as pd

from sweep import __version__
from sweep.base.errors import ForeignResultsError, SurroundingsError
from sweep.base.records import canonical, digest, write_whole
from sweep.plan import Planned
from sweep.runner.parquet import from_file, schema_of, to_bytes
from sweep.study.model import Study

SCHEMA = 1
ROWS = 8192  # points a file, by plan index
_PACKAGES = ("numpy", "scipy", "pandas", "numba", "llvmlite", "pyarrow", "matplotlib")


def versions() -> dict[str, str]:
    """Return what the numbers depend on beside the study."""
    return {"sweep": __version__, "python": platform.python_version(), "machine": platform.machine(), **{p: version(p) for p in _PACKAGES}}


class Store:
    """A results folder, open for one run. Use as a context: the lock is let go at the end."""

    def __init__(self, folder: Path, study: Study, plan: Planned, fresh: bool = False) -> None:
        """Open a folder; ForeignResultsError where it holds another study's results, SurroundingsError where it is locked or damaged."""
        self.folder, self.study, self.plan = folder, study, plan
        self._lock = _Lock(folder)
        self._lock.take()
        try:
            if fresh:
                _move_aside(folder)
            self.manifest = self._opened()
            self._clean()
        except BaseException:
            self._lock.let_go()
            raise

    def __enter__(self) -> "Store":
        return self

    def __exit__(self, *_: object) -> None:
        self._lock.let_go()

    def _opened(self) -> dict[str, Any]:
        manifest = read_manifest(self.folder)
        fresh = {
            "schema": SCHEMA, "study": self.study.text, "study_name": self.study.name, "study_digest": self.study.digest,
            "versions": versions(), "seed": self.study.seed, "plan": _plan_record(self.study, self.plan), "files": {}, "analyses": {},
            "state": "running",
        }  # fmt: skip
        if manifest is None:
            if (self.folder / "points").is_dir() and any((self.folder / "points").glob("*.parquet")):
                raise SurroundingsError(f"{self.folder} holds points but no manifest.json; --fresh moves it aside and starts again")
            return fresh
        for key, what in (("study_digest", "another study"), ("plan", "another plan"), ("versions", "other versions of the program")):
            if manifest.get(key) != fresh[key]:
                changed = _changed(manifest.get(key), fresh[key])
                raise ForeignResultsError(f"{self.folder} holds the results of {what} ({changed}); --fresh moves them aside and starts again")
        return manifest

    def _clean(self) -> None:
        """Remove what an interrupted run left half-written."""
        for path in self.folder.rglob(".*"):
            if path.is_file() and path.name != _Lock.NAME:
                path.unlink(missing_ok=True)

    def missing(self) -> list[int]:
        """Return the first plan index of each file that is not there whole."""
        return [start for start in range(0, self.plan.size, ROWS) if not self.whole(_name(start))]

    def whole(self, name: str) -> bool:
        """Tell whether a file of the results is there as its digest says."""
        path = self.folder / name
        known = self.manifest["files"].get(name)
        return known is not None and path.is_file() and digest(path.read_bytes()) == known

    def add_points(self, start: int, table: pd.DataFrame) -> None:
        """Write the file of points that begins at a plan index."""
        self.add(_name(start), to_bytes(table, schema_of(self.study, self.plan.columns)))

    def add(self, name: str, data: bytes | str) -> None:
        """Write a file of the results and note its digest."""
        data = data.encode("utf-8") if isinstance(data, str) else data
        write_whole(self.folder / name, data)
        self.manifest["files"][name] = digest(data)
        self.save()

    def save(self) -> None:
        """Write the manifest."""
        write_whole(self.folder / "manifest.json", canonical(self.manifest, indent=1))

    def log(self, **entry: object) -> None:
        """Append a line to the log: when, how long, which worker."""
        line = json.dumps({"at": time.strftime("%Y-%m-%dT%H:%M:%S%z"), **entry}, sort_keys=True)
        try:
            with open(self.folder / "log.jsonl", "a", encoding="utf-8") as file:
                file.write(line + "\n")
        except OSError as error:
            raise SurroundingsError(f"{self.folder / 'log.jsonl'} cannot be written: {error.strerror or error}") from None

    def tables(self) -> Iterator[pd.DataFrame]:
        """Yield the points, a file at a time."""
        return read_points(self.folder, self.plan.size)


def read_points(folder: Path, size: int) -> Iterator[pd.DataFrame]:
    """Yield the tables of a results folder in plan order; SurroundingsError where one is missing or damaged."""
    for start in range(0, size, ROWS):
        yield from_file(folder / _name(start))


def read_manifest(folder: Path) -> dict[str, Any] | None:
    """Return the manifest of a results folder, None where there is none; SurroundingsError where it cannot be used."""
    path = folder / "manifest.json"
    try:
        manifest = json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        return None
    except (OSError, ValueError) as error:
        raise SurroundingsError(f"{path} cannot be read: {error}") from None
    if not isinstance(manifest, dict) or not isinstance(manifest.get("files"), dict):
        raise SurroundingsError(f"{path} is damaged: it lists no files")
    if manifest.get("schema") != SCHEMA:
        raise SurroundingsError(f"{path} has schema {manifest.get('schema')!r}; this version of the program reads {SCHEMA}")
    return manifest


def _name(start: int) -> str:
    return f"points/{start // ROWS:06d}.parquet"


def _plan_record(study: Study, plan: Planned) -> dict[str, Any]:
    record: dict[str, Any] = {"kind": plan.kind, "size": plan.size}
    if plan.kind == "list" and study.plan is not None and study.plan.file is not None:
        record["list_digest"] = digest(study.plan.file.read_bytes())
    return record


def _changed(before: Any, now: Any) -> str:
    if isinstance(before, dict) and isinstance(now, dict):
        keys = [key for key in sorted({*before, *now}) if before.get(key) != now.get(key)]
        return ", ".join(f"{key}: {_short(before.get(key))} then, {_short(now.get(key))} now" for key in keys)
    return f"digest {_short(before)} then, {_short(now)} now"


def _short(value: Any) -> str:
    """Return a value in words, a digest by its first twelve signs."""
    return str(value)[:12] if isinstance(value, str) and len(value) == 64 else str(value)


def _move_aside(folder: Path) -> None:
    """Rename what a folder holds, but for the lock, into a numbered neighbour; nothing is deleted."""
    held = [path for path in folder.iterdir() if path.name != _Lock.NAME]
    if not held:
        return
    number = next(k for k in range(1, 1_000_000) if not folder.with_name(f"{folder.name}.{k}").exists())
    target = folder.with_name(f"{folder.name}.{number}")
    try:
        target.mkdir()
        for path in held:
            path.rename(target / path.name)
    except OSError as error:
        raise SurroundingsError(f"{folder} cannot be moved aside: {error.strerror or error}") from None


class _Lock:
    """A file that says which process works in a folder; one whose process is gone is taken over."""

    NAME = ".lock"

    def __init__(self, folder: Path) -> None:
        self.path = folder / self.NAME
        self.held = False

    def take(self) -> None:
        """Take the lock; SurroundingsError where another living process holds it or the folder cannot be written."""
        mine = json.dumps({"host": socket.gethostname(), "process": os.getpid(), "started": _started(os.getpid())})
        for _ in range(2):
            try:
                self.path.parent.mkdir(parents=True, exist_ok=True)
                handle = os.open(self.path, os.O_CREAT | os.O_EXCL | os.O_WRONLY)
            except FileExistsError:
                self._refuse_or_remove()
                continue
            except OSError as error:
                raise SurroundingsError(f"{self.path.parent} cannot be written: {error.strerror or error}") from None
            with os.fdopen(handle, "w") as file:
                file.write(mine)
            self.held = True
            return
        raise SurroundingsError(f"{self.path.parent} is in use by another run")

    def _refuse_or_remove(self) -> None:
        try:
            owner = json.loads(self.path.read_text())
            here = owner["host"] == socket.gethostname()
            process = int(owner["process"])
        except (OSError, ValueError, KeyError, TypeError):
            owner, here, process = {}, True, -1
        if not here or (process > 0 and _started(process) == owner.get("started") and _started(process) is not None):
            raise SurroundingsError(f"{self.path.parent} is in use by process {process} on {owner.get('host')}; wait for it, or choose another --out")
        self.path.unlink(missing_ok=True)

    def let_go(self) -> None:
        """Let the lock go."""
        if self.held:
            self.path.unlink(missing_ok=True)
            self.held = False


def _started(process: int) -> str | None:
    """Return when a process started, so that a number used again is not taken for it; None where it is gone."""
    try:
        os.kill(process, 0)
    except PermissionError:
        pass
    except (OSError, OverflowError):
        return None
    if sys.platform.startswith("linux"):
        try:
            return Path(f"/proc/{process}/stat").read_text().rpartition(")")[2].split()[19]
        except (OSError, IndexError):
            return None
    return "alive"
