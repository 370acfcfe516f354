"""How soon a command answers, each in a process of its own, beside `import pandas` (`-m benchmark`; a short form in the normal run).

As installed: a copy of the package with its bytecode, since a source tree may have none. Processor time of the process is what counts:
waiting for a busy machine is not the program's own.
"""

import compileall
import os
import resource
import shutil
import subprocess
import sys
import time
from collections.abc import Mapping
from pathlib import Path

import numpy as np
import pytest

import sweep

DEMO = Path(__file__).parents[2] / "studies" / "acylation.toml"
HELP, CHECK, BATCH, COMPILE = 0.2, 1.2, 1.8, 20.0  # s, what the commands must keep to
ROUNDS = 7
SWEEP = ("-m", "sweep.cli.main")
COMMANDS: dict[str, tuple[str, ...]] = {
    "--help": (*SWEEP, "--help"),
    "check": (*SWEEP, "check", str(DEMO)),
    "batch": (*SWEEP, "batch", str(DEMO), "--no-figures", "--out", "out"),
    "import pandas": ("-c", "import pandas"),
}


@pytest.fixture(scope="module")
def installed(tmp_path_factory) -> Path:
    """Return a folder with a copy of the package and its bytecode, the kernel compiled."""
    folder = tmp_path_factory.mktemp("installed")
    shutil.copytree(Path(sweep.__file__).parent, folder / "sweep", ignore=shutil.ignore_patterns("__pycache__"))
    assert compileall.compile_dir(folder / "sweep", quiet=1)
    _timed(COMMANDS["batch"], folder)
    return folder


def _timed(command: tuple[str, ...], folder: Path, more: Mapping[str, str] | None = None) -> tuple[float, float, str]:
    """Run Python in a folder; return the processor's and the clock's seconds, and what it wrote to standard error."""
    before, begun = resource.getrusage(resource.RUSAGE_CHILDREN), time.perf_counter()
    done = subprocess.run([sys.executable, *command], cwd=folder, env={**os.environ, **(more or {})}, capture_output=True, text=True, check=True)
    clock, after = time.perf_counter() - begun, resource.getrusage(resource.RUSAGE_CHILDREN)
    return after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime, clock, done.stderr


def _medians(folder: Path, rounds: int) -> dict[str, np.ndarray]:
    """Return each command's median seconds, of the processor and by the clock; the commands take turns."""
    seconds = [[_timed(command, folder)[:2] for command in COMMANDS.values()] for _ in range(rounds)]
    return dict(zip(COMMANDS, np.median(seconds, axis=0), strict=True))


def test_commands_cost_no_more_than_a_few_imports_of_pandas(installed):
    """A yardstick of the machine's own, which varies by half from hour to hour: 0.9 to 1.5 of it were seen for `check`, 1.7 to 2.7 for `batch`.
    What they must not load is tested by name (`tests/cli/test_commands.py`); the seconds are the benchmark's."""
    cost = {name: processor for name, (processor, _) in _medians(installed, 3).items()}
    assert 0.5 > cost["--help"] / cost["import pandas"]
    assert 3.0 > cost["check"] / cost["import pandas"]
    assert 4.0 > cost["batch"] / cost["import pandas"]


@pytest.mark.benchmark
def test_commands_answer_in_time(installed, capsys):
    medians = _medians(installed, ROUNDS)
    with capsys.disabled():
        print()
        for name, (processor, clock) in medians.items():
            print(f"{name:13} {processor:5.2f} s of the processor, {clock:5.2f} s by the clock")
    for name, bar in (("--help", HELP), ("check", CHECK), ("batch", BATCH)):
        assert bar >= medians[name][0], name


@pytest.mark.benchmark
def test_first_compile_is_short_and_announced(installed, tmp_path, capsys):
    processor, clock, told = _timed(COMMANDS["batch"], installed, {"SWEEP_CACHE_DIR": str(tmp_path)})
    with capsys.disabled():
        print(f"\nfirst batch, with compiling: {processor:.1f} s of the processor, {clock:.1f} s by the clock")
    assert "compiling the integrator, once per installation" in told
    assert COMPILE >= processor - _timed(COMMANDS["batch"], installed, {"SWEEP_CACHE_DIR": str(tmp_path)})[0]
