"""The commands as a user calls them: what they print, what they write, how they end."""

import json
import os
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import pandas as pd
import pytest

import sweep
from sweep.cli.main import main
from tests.texts import SMALL


@pytest.fixture
def here(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "small.toml").write_text(SMALL.replace("levels = 20", "levels = 4").replace("levels = 30", "levels = 4"))
    return tmp_path


def _sweep(*arguments, **options):
    return subprocess.run([sys.executable, "-m", "sweep.cli.main", *arguments], capture_output=True, text=True, check=False, **options)


def test_help_names_every_command_and_exit_status(capsys):
    with pytest.raises(SystemExit) as ended:
        main(["--help"])
    text = capsys.readouterr().out
    assert 0 == ended.value.code
    assert all(word in text for word in ("new", "check", "batch", "run", "report", "exit status", "local codes"))


@pytest.mark.parametrize("command", ["new", "check", "batch", "run", "report"])
def test_every_command_has_help(command, capsys):
    with pytest.raises(SystemExit) as ended:
        main([command, "--help"])
    assert 0 == ended.value.code
    assert command in capsys.readouterr().out


def test_help_loads_nothing_heavy():
    code = (
        "import sys\nfrom sweep.cli.main import main\n"
        "try:\n    main(['--help'])\nexcept SystemExit:\n    pass\n"
        "print({'numpy', 'pandas', 'numba', 'scipy', 'matplotlib', 'pint', 'pyarrow'} & set(sys.modules), file=sys.stderr)"
    )
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert "set()" == found.stderr.strip()


def test_check_loads_neither_tables_nor_the_kernel(here):
    code = (
        "import sys\nfrom sweep.cli.main import main\nmain(['check', 'small.toml'])\n"
        "print({'pandas', 'numba', 'matplotlib', 'pyarrow'} & set(sys.modules), file=sys.stderr)"
    )
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert "set()" == found.stderr.strip()


def test_batch_loads_no_compiler_once_the_kernel_is_compiled(here, monkeypatch, capsys):
    """Nor what only figures and long runs need."""
    assert 0 == main(["batch", "small.toml", "--no-figures"])
    capsys.readouterr()
    monkeypatch.setenv("PYTHONPATH", str(Path(sweep.__file__).parents[1]))  # the package that compiled it, wherever another is installed
    code = (
        "import sys\nfrom sweep.cli.main import main\nmain(['batch', 'small.toml', '--no-figures'])\n"
        "print({'numba', 'scipy.linalg', 'scipy.optimize', 'joblib', 'matplotlib', 'pyarrow.parquet'} & set(sys.modules), file=sys.stderr)"
    )
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert "set()" == found.stderr.strip()


def test_new_check_and_never_overwrite(here, capsys):
    assert 0 == main(["new", "start.toml"])
    text = (here / "start.toml").read_text()
    assert 0 == main(["check", "start.toml"])
    told = capsys.readouterr().out
    assert "no faults, 0 warnings" in told
    assert re.search(r"adiabatic rise 12\d\.\d K", told)
    assert 2 == main(["new", "start.toml"])
    assert text == (here / "start.toml").read_text()


def test_new_says_what_to_type_for_a_name_with_spaces(here, capsys):
    assert 0 == main(["new", "my study.toml"])
    assert "sweep check 'my study.toml', then sweep run 'my study.toml'" in capsys.readouterr().out


def test_new_where_there_is_no_folder(here, capsys):
    assert 4 == main(["new", "none/start.toml"])
    assert "is no folder" in capsys.readouterr().err


def test_check_writes_nothing_and_speaks_the_studys_units(here, capsys):
    before = sorted(here.iterdir())
    assert 0 == main(["check", "small.toml"])
    told = capsys.readouterr().out
    assert before == sorted(here.iterdir())
    assert "max_temperature at most 62 degC" in told
    assert "dose: 0.5 mol/L to 2.5 mol/L, 4 levels, now 1.5 mol/L" in told
    assert "points: 16 (factorial)" in told


def test_check_says_batch_events_and_slice_in_the_units_written(here, capsys):
    more = '''
[[events]]
time = "90 min"
set = { "cooling.temperature" = "30 degC", "vessel.U" = "250 W/m2/K" }
[[events]]
time = "1 h"
set = { "cooling.kind" = "adiabatic" }
'''
    text = SMALL.replace("[window]", 'third = { sets = "vessel.area", from = "3 m2", to = "6 m2", levels = 2 }\n[window]\nat = { third = "4 m2" }')
    (here / "more.toml").write_text(text + more)
    assert 0 == main(["check", "more.toml"])
    told = capsys.readouterr().out
    for line in ("ends after 6 h", "turnaround: 2 h", "at 1 h: cooling.kind = adiabatic", "window over dose and start, at third 4 m2",
                 "at 90 min: cooling.temperature = 30 degC, vessel.U = 250 W/m2/K", "batch time, sought up to 24 h"):  # fmt: skip
        assert f"  {line}\n" in told
    (here / "more.toml").write_text(text.replace('batch_time = "6 h"', 'batch_time = "to target"').replace('turnaround = "2 h"', ""))
    assert 0 == main(["check", "more.toml"])
    told = capsys.readouterr().out
    assert "ends when the target is reached, never before its last feed ends; at 24 h where it is not reached" in told
    assert "turnaround: none" in told


def test_check_of_a_faulty_study_lists_every_fault(here, capsys):
    text = SMALL.replace('batch_time = "6 h"', 'batch_time = "6 K"').replace('product = "R"', 'product = "Q"')
    (here / "bad.toml").write_text(text)
    assert 2 == main(["check", "bad.toml"])
    said = capsys.readouterr().err
    assert "bad.toml:" in said
    assert "recipe.batch_time" in said
    assert "target.product" in said
    assert "2 faults" in said


def test_study_that_is_not_there(here, capsys):
    assert 2 == main(["check", "none.toml"])
    assert "none.toml" in capsys.readouterr().err


def test_batch_prints_margins_and_writes_tables(here, capsys):
    assert 0 == main(["batch", "small.toml", "--no-figures"])
    told = capsys.readouterr().out
    assert "max_temperature at most 62 degC: holds" in told
    assert re.search(r"margin \+\d", told)
    assert "MTSR" in told
    assert "approve" in told
    folder = here / "results" / "small" / "batch"
    assert {"set_point_profile.csv", "limits.csv", "failure_times.csv"} <= {p.name for p in (folder / "analyses").iterdir()}
    assert 0.9 < json.loads((folder / "summary.json").read_text())["set_point"]["responses"]["conversion"]


def test_batch_ends_with_1_where_a_limit_does_not_hold(here, capsys):
    assert 1 == main(["batch", "small.toml", "--no-figures", "--set", "dose=2.5 mol/L", "--set", "start=60 degC"])
    assert "DOES NOT HOLD" in capsys.readouterr().out


def test_batch_takes_a_path_of_the_study(here, capsys):
    assert 0 == main(["batch", "small.toml", "--no-figures", "--set", "vessel.U=500 W/m2/K", "--out", "elsewhere"])
    assert (here / "elsewhere" / "batch" / "summary.json").exists()
    capsys.readouterr()


def test_batch_takes_a_path_that_a_variable_sets_and_says_what_was_set(here, capsys):
    found = []
    for setting in ("dose=1 mol/L", "recipe.charge.concentration.A=1 mol/L"):
        main(["batch", "small.toml", "--no-figures", "--set", setting, "--set", "vessel.U=400 W/m2/K"])
        told = capsys.readouterr().out
        assert re.search(r"^  dose: 1 mol/L$", told, re.M)
        assert re.search(r"^  vessel\.U: 400 W/m2/K$", told, re.M)
        folder = here / "results" / "small" / "batch"
        summary = json.loads((folder / "summary.json").read_text())
        assert {"value": pytest.approx(1000.0), "unit": "mol/m^3", "written": "1 mol/L"} == summary["set_point"]["inputs"]["dose"]
        inputs = pd.read_csv(folder / "analyses" / "inputs.csv").set_index("path")
        assert ("1 mol/L", pytest.approx(1000.0)) == tuple(inputs.loc["recipe.charge.concentration.A", ["written", "value_si"]])
        assert ("400 W/m2/K", 400.0) == tuple(inputs.loc["vessel.U", ["written", "value_si"]])
        found.append(summary["set_point"])
    assert found[0] == found[1]


@pytest.mark.parametrize(
    ("setting", "words"),
    [
        ("dose", "NAME=VALUE"),
        ("=1 h", "NAME=VALUE"),
        ("doze=1 mol/L", "did you mean dose"),
        ("dose=1 h", "concentration"),
        ("dose=1,5 mol/L", "point"),
        ("dose=nan mol/L", "number"),
        ("limits.mtsr.at_most=90 degC", "limits.mtsr.at_most"),
    ],
)
def test_batch_refuses_settings_that_make_no_sense(here, capsys, setting, words):
    assert 2 == main(["batch", "small.toml", "--no-figures", "--set", setting])
    assert words in capsys.readouterr().err


def test_batch_refuses_two_settings_of_one_thing(here, capsys):
    both = ["--set", "dose=1 mol/L", "--set", "recipe.charge.concentration.A=2 mol/L"]
    assert 2 == main(["batch", "small.toml", "--no-figures", *both])
    assert "both set" in capsys.readouterr().err
    assert 2 == main(["batch", "small.toml", "--no-figures", "--set", "dose=1 mol/L", "--set", "dose=2 mol/L"])
    assert "set twice" in capsys.readouterr().err


AXES = 'axes = ["dose", "start"]'


@pytest.mark.parametrize(
    ("changes", "said", "unsaid"),
    [
        ({AXES: AXES}, ["over dose and start: every limit holds in", "dose up: 0."], ["the point itself"]),
        ({'at_most = "62 degC"': 'at_most = "41 degC"'}, ["the point itself does not hold every limit"], ["no edge within", " to the edge"]),
        ({"conversion = 0.9": "conversion = 0.99999", '"24 h"': '"6 h"', "[limits]": '[limits]\ntime_to_target = { at_most = "9 h" }'},
         ["target not reached", "no value: never reached", "nearest limit: time_to_target, which has no value at the set-point"],
         ["margin -\n", "no value: time_to_target"]),
    ],
    ids=["inside", "outside", "never reached"],
)  # fmt: skip
def test_answers_are_said_for_what_they_are(here, capsys, changes, said, unsaid):
    text = (here / "small.toml").read_text()
    for old, new in changes.items():
        text = text.replace(old, new)
    (here / "small.toml").write_text(text)
    main(["batch", "small.toml", "--no-figures"])
    main(["run", "small.toml", "--workers", "1"])
    told = capsys.readouterr().out
    assert [] == [words for words in said if words not in told], told
    assert [] == [words for words in unsaid if words in told], told
    main(["run", "small.toml", "--workers", "1"])
    assert capsys.readouterr().out in told  # the same words from kept results


def test_run_from_study_to_report(here, capsys):
    assert 0 == main(["run", "small.toml", "--workers", "1"])
    told = capsys.readouterr()
    assert "16 of 16 points" in told.err
    assert "Operating window" in told.out
    assert "report.html" in told.out
    folder = here / "results" / "small"
    assert {"manifest.json", "log.jsonl", "points", "analyses", "summary.json", "figures", "report.html"} <= {p.name for p in folder.iterdir()}
    assert "complete" == json.loads((folder / "manifest.json").read_text())["state"]
    answers = (folder / "summary.json").read_bytes()
    assert 0 == main(["run", "small.toml", "--quiet"])
    assert answers == (folder / "summary.json").read_bytes()
    (folder / "report.html").unlink()
    assert 0 == main(["report", str(folder)])
    assert (folder / "report.html").exists()


def test_run_is_the_same_for_any_number_of_workers(here, capsys):
    for name, workers in (("one", "1"), ("two", "2")):
        assert 0 == main(["run", "small.toml", "--workers", workers, "--out", name, "--quiet"])
    for part in ("summary.json", "points", "analyses"):
        files = [here / "one" / part] if part.endswith("json") else sorted((here / "one" / part).iterdir())
        for file in files:
            assert file.read_bytes() == (here / "two" / file.relative_to(here / "one")).read_bytes()


def test_run_of_a_changed_study_is_refused_and_fresh_moves_aside(here, capsys):
    assert 0 == main(["run", "small.toml", "--quiet"])
    study = here / "small.toml"
    study.write_text(study.read_text().replace("conversion = 0.9", "conversion = 0.8"))
    assert 2 == main(["run", "small.toml", "--quiet"])
    said = capsys.readouterr().err
    assert "another study:\n  target.conversion: 0.9 then, 0.8 now\n--fresh moves" in said
    assert 0 == main(["run", "small.toml", "--quiet", "--fresh"])
    assert (here / "results" / "small.1" / "summary.json").exists()


def test_list_that_is_missing_or_has_changed(here, capsys):
    bare = SMALL[: SMALL.index("[window]")] + SMALL[SMALL.index("[failure]") :]
    (here / "listed.toml").write_text(bare + '\n[plan]\nkind = "list"\nfile = "points.csv"\n')
    assert 2 == main(["check", "listed.toml"])
    told = capsys.readouterr()
    assert ("", "plan.file: points.csv cannot be read: No such file or directory\n") == tuple(told)
    (here / "points.csv").write_text("dose [mol/L]\n1\n2\n")
    assert 0 == main(["run", "listed.toml", "--workers", "1"])
    (here / "points.csv").write_text("dose [mol/L]\n1\n2.1\n")
    capsys.readouterr()
    assert 2 == main(["run", "listed.toml", "--workers", "1"])
    assert re.search(r"another plan:\n  list_digest: [0-9a-f]{12} then, [0-9a-f]{12} now\n--fresh", capsys.readouterr().err)


def test_report_of_no_results(here, capsys):
    (here / "empty").mkdir()
    assert main(["report", "empty"]) in (2, 4)
    assert "empty" in capsys.readouterr().err


def test_results_folder_that_cannot_be_written(here, capsys):
    (here / "file").write_text("")
    assert 4 == main(["run", "small.toml", "--out", "file/results"])
    assert "cannot be written" in capsys.readouterr().err


def test_wrong_call_ends_with_2():
    assert 2 == _sweep("run").returncode
    assert 2 == _sweep("nothing").returncode


@pytest.mark.skipif(sys.platform == "win32", reason="signals as POSIX has them")
@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_interrupted_run_says_how_to_go_on_and_does(here, number):
    (here / "long.toml").write_text(SMALL.replace("levels = 20", "levels = 400").replace("levels = 30", "levels = 400"))
    process = subprocess.Popen([sys.executable, "-m", "sweep.cli.main", "run", "long.toml", "--workers", "1"], stderr=subprocess.PIPE, text=True)
    points = here / "results" / "long" / "points"
    until = time.monotonic() + 120.0
    while time.monotonic() < until and not (points.is_dir() and any(points.glob("0*.parquet"))):
        time.sleep(0.05)
    os.kill(process.pid, number)
    _, said = process.communicate(timeout=120)
    assert 3 == process.returncode
    assert "goes on where it stopped" in said
    assert not (here / "results" / "long" / ".lock").exists()
    assert any(points.glob("0*.parquet"))
