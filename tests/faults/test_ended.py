"""Runs that are ended from outside: killed, asked to end, interrupted. What was done stays, nothing lives on, the results are the same."""

import os
import random
import signal
import subprocess
import time

import pytest

from tests.faults import driver

pytestmark = pytest.mark.skipif(not os.path.isdir("/proc/self"), reason="looks for processes in /proc")


def _killed_and_resumed(study, out, seed, times, undisturbed):
    """Kill whole runs at random moments; return how many were still at work. Nothing that was reported done may change."""
    draw, hurt, seconds = random.Random(seed), 0, float((undisturbed.parent / "seconds").read_text())
    for _ in range(times):
        before = driver.reported(out)
        process = driver.start(study, out, fault=driver.SLOW)
        try:
            process.communicate(timeout=draw.uniform(0.1, 0.9) * seconds)
        except subprocess.TimeoutExpired:
            hurt += 1
            os.killpg(process.pid, signal.SIGKILL)
            process.communicate()
            assert driver.nothing_left(process.pid)
        else:
            assert 0 == process.returncode
        assert before == {name: data for name, data in driver.reported(out).items() if name in before}
    return hurt


def _same_after(study, out, undisturbed):
    status, _, said = driver.run(study, out)
    assert 0 == status, said
    assert driver.results(undisturbed) == driver.results(out)
    assert not list(out.rglob(".*"))


def test_run_killed_at_random_moments(study, undisturbed, tmp_path):
    _killed_and_resumed(study, tmp_path / "out", 1, 2, undisturbed)
    _same_after(study, tmp_path / "out", undisturbed)


@pytest.mark.long
def test_run_killed_at_twenty_random_moments(study, undisturbed, tmp_path):
    hurt = sum(_killed_and_resumed(study, tmp_path / f"out{k}", k, 4, undisturbed) for k in range(5))
    for k in range(5):
        _same_after(study, tmp_path / f"out{k}", undisturbed)
    assert hurt >= 10


def test_main_process_killed_alone_leaves_no_worker_behind(study, undisturbed, tmp_path):
    process = driver.start(study, tmp_path / "out", fault=driver.SLOW)
    driver.wait_for_files(process, tmp_path / "out")
    assert driver.workers(process.pid)
    process.kill()
    process.communicate()
    assert driver.nothing_left(process.pid)
    done = driver.rows_computed(tmp_path / "out")
    assert 0 < done < driver.SIZE
    _same_after(study, tmp_path / "out", undisturbed)
    assert driver.SIZE <= driver.rows_computed(tmp_path / "out") <= driver.SIZE + 8192  # a file may be whole and not yet in the log


def test_worker_killed_costs_nothing_but_time(study, undisturbed, tmp_path):
    process = driver.start(study, tmp_path / "out", fault=driver.SLOW)
    driver.wait_for_files(process, tmp_path / "out")
    os.kill(driver.workers(process.pid)[0], signal.SIGKILL)
    status, _, said = driver.finish(process)
    assert (0, "") == (status, said)
    assert driver.results(undisturbed) == driver.results(tmp_path / "out")
    assert "SIGKILL" in (tmp_path / "out" / "log.jsonl").read_text()
    assert driver.nothing_left(process.pid)


@pytest.mark.long
def test_workers_that_are_killed_again_and_again_end_the_run_in_words(study, undisturbed, tmp_path):
    process = driver.start(study, tmp_path / "out", fault=driver.SLOW)
    driver.wait_for_files(process, tmp_path / "out")
    until = time.monotonic() + driver.LIMIT
    while process.poll() is None and time.monotonic() < until:
        for worker in driver.workers(process.pid):
            os.kill(worker, signal.SIGKILL)
        time.sleep(0.02)
    status, _, said = driver.finish(process)
    assert 4 == status, said
    assert "worker processes do not live" in said
    assert driver.nothing_left(process.pid)
    _same_after(study, tmp_path / "out", undisturbed)


@pytest.mark.parametrize(
    ("number", "everyone"), [(signal.SIGINT, True), (signal.SIGTERM, False), pytest.param(signal.SIGHUP, False, marks=pytest.mark.long)]
)
def test_run_that_is_asked_to_end(study, undisturbed, tmp_path, number, everyone):
    """Ctrl-C reaches every process of a terminal, and impatient people press it twice; SIGTERM is for the main process."""
    out = tmp_path / "out"
    process = driver.start(study, out, fault=driver.SLOW)
    driver.wait_for_files(process, out)
    if everyone:
        os.killpg(process.pid, number)
        time.sleep(0.05)
        os.killpg(process.pid, number)
    else:
        process.send_signal(number)
    status, told, said = driver.finish(process)
    assert (3, "") == (status, told)
    assert ["interrupted. The points that are done stay; the same command goes on where it stopped."] == said.splitlines()
    assert driver.nothing_left(process.pid)
    assert not (out / ".lock").exists()
    done = driver.rows_computed(out)
    assert 0 < done < driver.SIZE
    _same_after(study, out, undisturbed)
    assert driver.SIZE == driver.rows_computed(out)


def test_nobody_reads_what_is_printed(study, undisturbed, tmp_path):
    with driver.start(study, tmp_path / "out") as process:
        process.stdout.close()  # as `sweep run ... | head` does, once it has its lines
        said = process.stderr.read()
        assert 4 == process.wait(timeout=driver.LIMIT)
    assert ["standard output cannot be written: Broken pipe; what is in the results folder stays"] == said.splitlines()
    assert driver.results(undisturbed) == driver.results(tmp_path / "out")


@pytest.mark.long
def test_nobody_reads_progress(study, tmp_path, undisturbed):
    """Notes that cannot be shown end no run."""
    with driver.start(study, tmp_path / "out", quiet=False) as process:
        process.stderr.close()
        told = process.stdout.read()
        assert 0 == process.wait(timeout=driver.LIMIT)
    assert "33,600 done" in told
    assert driver.results(undisturbed) == driver.results(tmp_path / "out")
