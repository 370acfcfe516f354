"""Runs of a small study in processes of their own, to be hurt, and what is compared afterwards.

The study has 33,600 points in five files, evaluated by worker processes; undisturbed it takes a few seconds.
"""

import contextlib
import json
import os
import subprocess
import sys
import time
from pathlib import Path

import pyarrow.parquet as pq

from tests.texts import isothermal

ROOT = Path(__file__).parents[2]
STUDY = isothermal("A -> R | 1e-3 1/s\nR -> S | 1e-4 1/s", species="A R S", relative=1e-4, turnaround="1 h", batch_time="2 h", conversion=0.9) + """
[variables]
dose = { sets = "recipe.charge.concentration.A", from = "0.5 mol/L", to = "2.5 mol/L", levels = 120 }
time = { sets = "recipe.batch_time", from = "0.5 h", to = "4 h", levels = 280 }
[limits]
per_product_S = { at_most = 0.5 }
[batch_time]
[window]
axes = ["dose", "time"]
"""
SIZE, FILES = 33_600, 5
SLOW = "slow 0.4"  # a fault: without it a worker's task takes some 0.05 s, and a run may be over before it is hurt
LIMIT = 120.0  # s after which a run hangs


def environment(fault: str = "", **more: str) -> dict[str, str]:
    """Return the environment of a run; fault: see patches/sitecustomize.py."""
    paths = [*([str(Path(__file__).with_name("patches"))] if fault else []), str(ROOT)]
    return {**os.environ, "PYTHONPATH": os.pathsep.join(paths), "SWEEP_FAULT": fault, **more}


def write_study(folder: Path, text: str = STUDY) -> Path:
    """Write the study into a folder."""
    path = folder / "study.toml"
    path.write_text(text)
    return path


def start(
    study: Path, out: Path, *options: str, fault: str = "", before: tuple[str, ...] = (), quiet: bool = True, **popen: object
) -> subprocess.Popen[str]:
    """Start `sweep run` of a study with two workers in a process group of its own; `before`: what runs the command."""
    command = [*before, sys.executable, "-m", "sweep.cli.main", "run", str(study), "--out", str(out), "--workers", "2", *options]
    command += ["--quiet"] if quiet else []
    settings = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE, "text": True, "start_new_session": True, "cwd": study.parent,
                "env": environment(fault), **popen}  # fmt: skip
    return subprocess.Popen(command, **settings)  # type: ignore[call-overload]


def finish(process: subprocess.Popen[str]) -> tuple[int, str, str]:
    """Return exit status, what was printed and what was said of a run."""
    told, said = process.communicate(timeout=LIMIT)
    return process.returncode, told, said


def run(study: Path, out: Path, *options: str, **more: object) -> tuple[int, str, str]:
    """Run to the end."""
    return finish(start(study, out, *options, **more))  # type: ignore[arg-type]


def wait_for_files(process: subprocess.Popen[str], out: Path, number: int = 1) -> None:
    """Wait until a run has reported a number of files of points."""
    until = time.monotonic() + LIMIT
    while rows_computed(out) < number * 8192:
        assert process.poll() is None, "the run was over before it could be hurt"
        assert time.monotonic() < until
        time.sleep(0.005)


def group(leader: int) -> list[int]:
    """Return the processes that live in the session of a run, from /proc."""
    found = []
    for folder in Path("/proc").glob("[0-9]*"):
        with contextlib.suppress(OSError, IndexError):
            state, _, _, session = (folder / "stat").read_text().rpartition(")")[2].split()[:4]
            if int(session) == leader and state not in "ZX":
                found.append(int(folder.name))
    return found


def workers(leader: int) -> list[int]:
    """Return the worker processes of a run."""
    found = []
    for process in group(leader):
        with contextlib.suppress(OSError):
            if b"sweep.runner.worker" in Path(f"/proc/{process}/cmdline").read_bytes():
                found.append(process)
    return found


def nothing_left(leader: int, within: float = 5.0) -> bool:
    """Tell whether every process of a run is gone within some seconds."""
    until = time.monotonic() + within
    while group(leader) and time.monotonic() < until:
        time.sleep(0.02)
    return not group(leader)


def results(out: Path) -> dict[str, bytes]:
    """Return what has to be the same bytes, whatever happened on the way."""
    files = [*sorted((out / "points").iterdir()), *sorted((out / "analyses").iterdir()), out / "summary.json"]
    return {str(path.relative_to(out)): path.read_bytes() for path in files}


def reported(out: Path) -> dict[str, bytes]:
    """Return the files that the manifest reports as done, as they are."""
    manifest = json.loads((out / "manifest.json").read_text()) if (out / "manifest.json").exists() else {"files": {}}
    return {name: (out / name).read_bytes() for name in manifest["files"]}


def rows_computed(out: Path) -> int:
    """Return how many points the log says were computed, all runs together."""
    if not (out / "log.jsonl").exists():
        return 0
    lines = [json.loads(line) for line in (out / "log.jsonl").read_text().splitlines()]
    return sum(line["rows"] for line in lines if line["what"] == "points" and "rows" in line)


def statuses(out: Path) -> dict[int, tuple[str, str]]:
    """Return index -> (status, reason) of every point that is not done."""
    found = {}
    for path in sorted((out / "points").iterdir()):
        table = pq.read_table(path, columns=["index", "status", "reason"]).to_pydict()
        found.update({i: (s, r) for i, s, r in zip(*table.values(), strict=True) if s != "done"})
    return found
