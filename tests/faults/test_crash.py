"""Evaluations that crash inside native code, as a signal that ends the process does: the point is named, every other is as ever."""

import json
import signal

import pandas as pd
import pytest

from sweep.base.errors import SurroundingsError, SweepError
from sweep.plan import planned
from sweep.runner import crew, read_points, simulate
from sweep.runner.parallel import in_order
from sweep.study import read_text
from tests.faults import driver
from tests.texts import SMALL

WHY = "the evaluation of this point crashed the process that did it"


def test_point_that_crashes_its_worker_is_named_and_the_others_stand(study, undisturbed, tmp_path):
    out = tmp_path / "out"
    status, told, said = driver.run(study, out, fault="crash 4711 20000")
    assert (1, "") == (status, said)
    assert "33,598 done, 0 runaway, 2 failed" in told
    assert {4711: ("failed", WHY), 20000: ("failed", WHY)} == driver.statuses(out)
    whole, hurt = (pd.concat(read_points(folder, driver.SIZE)) for folder in (undisturbed, out))
    pd.testing.assert_frame_equal(whole.drop([4711, 20000]), hurt.drop([4711, 20000]), check_exact=True)
    pd.testing.assert_frame_equal(whole.loc[[4711], ["dose", "time"]], hurt.loc[[4711], ["dose", "time"]], check_exact=True)
    assert hurt.loc[4711].drop(["dose", "time", "status", "reason"]).isna().all()
    failed = pd.read_csv(out / "analyses" / "failed_points.csv")
    assert [WHY, WHY] == failed["reason"].tolist()
    deaths = [line for line in map(json.loads, (out / "log.jsonl").read_text().splitlines()) if line["what"] == "worker ended"]
    assert {"SIGSEGV"} == {line["how"] for line in deaths}
    assert [4096, 4096, 256, 256, 16, 16, 1, 1, 1, 1] == sorted((line["rows"] for line in deaths), reverse=True)


def test_crash_in_the_main_process_is_survived_by_the_same_command(tmp_path):
    """A short plan runs in threads: the first run dies with them, the second works in processes that may die."""
    bare = SMALL[: SMALL.index("[window]")].replace("levels = 20", "levels = 4").replace("levels = 30", "levels = 51")
    study, out = driver.write_study(tmp_path, bare), tmp_path / "out"
    fault = f"crash-everywhere {298.15 + 40.0 * 7 / 50}"
    status, _, _ = driver.run(study, out, fault=fault)
    assert -signal.SIGSEGV == status
    status, _, said = driver.run(study, out, fault=fault, quiet=False)
    assert 1 == status, said
    assert "an earlier run here ended without a word" in said
    assert {7 + 51 * k: ("failed", WHY) for k in range(4)} == driver.statuses(out)


@pytest.fixture
def small():
    study = read_text(SMALL)
    return study, planned(study)


@pytest.fixture
def none_spare():
    """No worker of an earlier test, which has no faults, is there; and none with faults stays."""
    crew._dismiss()
    yield
    crew._dismiss()


def test_processes_give_what_threads_give(small):
    study, plan = small
    threads = pd.concat(table for _, table in in_order(study, plan, [0], plan.size, 2))
    processes = pd.concat(table for _, table in in_order(study, plan, [0, 300], 300, 2, apart=True))
    pd.testing.assert_frame_equal(threads, processes, check_exact=True)
    pd.testing.assert_frame_equal(threads, simulate(study, plan.rows(0, plan.size), 2, apart=True), check_exact=True)


def test_what_an_evaluation_raises_is_raised_here(small):
    study, _ = small
    with pytest.raises(SweepError, match="neither a variable"):
        simulate(study, pd.DataFrame({"none": [1.0]}), 1, apart=True)
    assert 1 == len(simulate(study, pd.DataFrame({"dose": [1000.0]}), 1, apart=True)), "the worker works on"


def test_spare_worker_that_died_meanwhile_is_replaced(small, none_spare):
    study, plan = small
    before = simulate(study, plan.rows(0, 20), 1, apart=True)
    (worker,) = crew._spare
    worker.process.kill()
    worker.process.wait()
    pd.testing.assert_frame_equal(before, simulate(study, plan.rows(0, 20), 1, apart=True), check_exact=True)
    assert worker not in crew._spare


def test_results_that_nobody_reads_to_their_end_leave_no_worker_at_work(small, none_spare):
    study, plan = small
    tables = in_order(study, plan, list(range(0, 600, 20)), 20, 1, apart=True)
    assert 0 == next(tables)[0]
    tables.close()
    assert [] == crew._spare


def test_machine_that_crashes_all_the_time_is_not_trusted(small, none_spare, monkeypatch):
    study, plan = small
    for name, value in driver.environment("crash 3 4 5 6").items():
        monkeypatch.setenv(name, value)
    monkeypatch.setattr(crew, "CRASHES", 2)
    with pytest.raises(SurroundingsError, match=r"crashed more than 2 times \(the last by SIGSEGV\); the points that are done stay"):
        simulate(study, plan.rows(0, 8), 1, apart=True)


def test_workers_that_cannot_start_are_told_of(small, none_spare, monkeypatch):
    study, plan = small
    monkeypatch.setattr(crew, "_CODE", "raise SystemExit(7)")
    with pytest.raises(SurroundingsError, match=r"worker processes do not live: 5 in a row .* by exit status 7"):
        simulate(study, plan.rows(0, 8), 1, apart=True)
