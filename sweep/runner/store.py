"""A results folder: what is done, under which study, with digests; one run at a time; nothing half-written.

Files are appended and never edited: a temporary dot name, fsync, rename, then their digest in the manifest.
"""

import json
import os
import re
import time
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import pandas as pd

from sweep.base.errors import SurroundingsError
from sweep.base.records import canonical, digest, settle, write_whole
from sweep.plan import Planned
from sweep.runner import lock
from sweep.runner.manifest import AGAIN, new_manifest, read_manifest, refuse_foreign, sealed
from sweep.runner.parquet import from_bytes, schema_of, to_bytes
from sweep.study.model import Study

ROWS = 8192  # points a file, by plan index
_HALF = re.compile(r"\..+\.\d+")  # the temporary name of a file that is being written


class Store:
    """A results folder, open for one run. Use as a context: the lock is let go at the end."""

    def __init__(self, folder: Path, study: Study, plan: Planned, fresh: bool = False) -> None:
        """Open a folder; ForeignResultsError where it holds another study's results, SurroundingsError where it is locked or damaged."""
        self.folder, self.study, self.plan = folder, study, plan
        self._lock = lock.Lock(folder)
        self._lock.take()
        self.broke_off = self._lock.stale  # the run before ended without a word: killed, crashed, or the power failed
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
        manifest, new = read_manifest(self.folder), new_manifest(self.study, self.plan)
        if manifest is None:
            if any((self.folder / "points").glob("*.parquet")):
                raise SurroundingsError(f"{self.folder} holds points but no manifest.json, so that nobody knows of which study; {AGAIN}")
            return new
        refuse_foreign(self.folder, manifest, new)
        return manifest

    def _clean(self) -> None:
        """Remove what an interrupted run left half-written, and nothing else that begins with a dot."""
        for folder in (self.folder, *(self.folder / name for name in ("points", "analyses", "figures"))):
            for path in folder.glob(".*"):
                if _HALF.fullmatch(path.name) and path.is_file():
                    try:
                        path.unlink(missing_ok=True)
                    except OSError as error:
                        raise SurroundingsError(f"{path} cannot be removed: {error.strerror or error}") from None

    def missing(self) -> list[int]:
        """Return the first plan index of each file that is not there whole."""
        return [start for start in range(0, self.plan.size, ROWS) if not self.whole(_name(start))]

    def whole(self, name: str) -> bool:
        """Tell whether a file of the results is there as its digest says."""
        known = self.manifest["files"].get(name)
        try:
            return known is not None and digest((self.folder / name).read_bytes()) == known
        except OSError:
            return False

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
        write_whole(self.folder / "manifest.json", canonical(sealed(self.manifest), indent=1))

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
        return _read(self.folder, self.plan.size, self.manifest["files"])


def read_points(folder: Path, size: int) -> Iterator[pd.DataFrame]:
    """Yield the tables of a results folder in plan order; SurroundingsError where one is missing or damaged."""
    return _read(folder, size, (read_manifest(folder) or {}).get("files", {}))


def _read(folder: Path, size: int, known: Mapping[str, str]) -> Iterator[pd.DataFrame]:
    for start in range(0, size, ROWS):
        path = folder / _name(start)
        try:
            data = path.read_bytes()
        except OSError as error:
            raise SurroundingsError(f"{path} cannot be read: {error.strerror or error}; `sweep run` computes it again") from None
        if digest(data) != known.get(_name(start)):
            raise SurroundingsError(f"{path} is damaged: it does not hold what was written; `sweep run` computes it again")
        yield from_bytes(data, path)


def _name(start: int) -> str:
    return f"points/{start // ROWS:06d}.parquet"


def _move_aside(folder: Path) -> None:
    """Rename what a folder holds, but for the lock, into a numbered neighbour; nothing is deleted.

    The manifest goes last, so that what is left behind by an interruption still says of which study it is.
    """
    held = sorted((path for path in folder.iterdir() if path.name != lock.NAME), key=lambda path: path.name == "manifest.json")
    if not held:
        return
    whole = Path(os.path.abspath(folder))  # "." has no name
    number = next(k for k in range(1, 1_000_000) if not whole.with_name(f"{whole.name}.{k}").exists())
    target = whole.with_name(f"{whole.name}.{number}")
    try:
        target.mkdir()
        for path in held:
            path.rename(target / path.name)
            settle(target)
            settle(folder)
    except OSError as error:
        raise SurroundingsError(f"{folder} cannot be moved aside: {error.strerror or error}") from None
