"""What the documents say against what the program has."""

import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
README, DEVELOPERS = (ROOT / "README.md").read_text(), (ROOT / "DEVELOPERS.md").read_text()


def test_readme_opens_with_the_job():
    first = README.split("\n\n")[1]
    assert first.startswith("A process engineer")


def test_check_script_runs_the_readmes_test_command():
    command = next(line.strip() for line in README.splitlines() if "'.[test]'" in line)
    assert command in (ROOT / ".ci" / "run").read_text()


@pytest.mark.parametrize("command", ["new", "check", "batch", "run", "report"])
def test_every_command_and_option_stands_in_the_readme(command):
    found = subprocess.run([sys.executable, "-m", "sweep.cli.main", command, "--help"], capture_output=True, text=True, check=True).stdout
    assert f"`sweep {command} " in README
    for option in set(re.findall(r"--[a-z-]+", found)) - {"--help"}:
        assert option in README, option


def test_every_module_stands_in_the_developers_page():
    for path in (ROOT / "sweep").rglob("*.py"):
        if path.name == "__init__.py" or path.parent.name == "window":
            continue
        known = path.name in DEVELOPERS or (path.stem.split("_")[0] + "*.py" in DEVELOPERS) or (path.stem.split("_")[0] + "_*.py" in DEVELOPERS)
        assert known, path


def test_exit_statuses_are_those_of_the_program():
    from sweep.base.errors import SurroundingsError, SweepError
    from sweep.cli.main import DONE, INTERRUPTED, SOME_FAILED, SURROUNDINGS, WRONG

    assert (0, 1, 2, 3, 4) == (DONE, SOME_FAILED, WRONG, INTERRUPTED, SURROUNDINGS)
    assert (WRONG, SURROUNDINGS) == (SweepError.exit_status, SurroundingsError.exit_status)


def test_every_dependency_has_its_reason():
    block = (ROOT / "pyproject.toml").read_text().split("dependencies = [")[1].split("]")[0]
    for line in filter(str.strip, block.splitlines()):
        assert "#" in line, line
