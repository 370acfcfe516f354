"""Disks that are full, folders that cannot be written, two runs at once, a clock that goes backwards."""

import json
import os
import resource
import shutil
import socket
import subprocess
import sys
from pathlib import Path

import pytest

from tests.faults import driver

pytestmark = pytest.mark.skipif(sys.platform != "linux", reason="mounts, limits and permissions as Linux has them")


def _ended_in_words(status, said, out, words):
    assert 4 == status, said
    assert words in said
    assert 1 == len(said.splitlines()), said
    assert not list(out.rglob(".*.[0-9]*")), "a half-written file was left"


def _same_after(study, out, undisturbed):
    status, _, said = driver.run(study, out)
    assert 0 == status, said
    assert driver.results(undisturbed) == driver.results(out)


def test_files_that_may_not_grow(study, undisturbed, tmp_path):
    """The limit lies between the sizes of the first file of points and of the others."""
    out = tmp_path / "out"
    sizes = [path.stat().st_size for path in sorted((undisturbed / "points").iterdir())]
    limit = (min(sizes) + max(sizes)) // 2
    assert min(sizes) < limit < max(sizes)
    status, _, said = driver.run(study, out, preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit)))
    _ended_in_words(status, said, out, "cannot be written: File too large")
    assert not (out / ".lock").exists()
    before = driver.reported(out)
    _same_after(study, out, undisturbed)
    assert before.items() <= driver.reported(out).items()


@pytest.fixture
def small_disk(tmp_path):
    """Return a folder on a disk of its own (in memory), which holds less than the results."""
    disk = tmp_path / "disk"
    disk.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", "size=2m", "tmpfs", str(disk)]
    if os.geteuid() != 0 or subprocess.run(mount, check=False, capture_output=True).returncode:
        pytest.skip("only root may mount")
    yield disk
    subprocess.run(["umount", "-l", str(disk)], check=True)


def test_disk_that_is_full(study, undisturbed, small_disk):
    size = sum(len(data) for data in driver.results(undisturbed).values())
    subprocess.run(["mount", "-o", f"remount,size={size * 6 // 10}", str(small_disk)], check=True)
    out = small_disk / "out"
    status, _, said = driver.run(study, out)
    _ended_in_words(status, said, out, "cannot be written: No space left on device")
    before = driver.reported(out)
    assert before
    subprocess.run(["mount", "-o", "remount,size=50m", str(small_disk)], check=True)
    _same_after(study, out, undisturbed)
    assert before.items() <= driver.reported(out).items()


def _without_powers():
    """Return what runs a command so that permissions count for it, for root too."""
    if os.geteuid() != 0:
        return ()
    if shutil.which("setpriv") is None:
        pytest.skip("permissions do not count for root")
    return ("setpriv", "--bounding-set=-dac_override,-dac_read_search")


def test_folder_that_cannot_be_written(study, undisturbed, tmp_path):
    out = tmp_path / "out"
    shutil.copytree(undisturbed, out)
    before = driver.results(out)
    out.chmod(0o555)
    status, _, said = driver.run(study, out, before=_without_powers())
    assert (4, f"{out} cannot be written: Permission denied\n") == (status, said)
    assert before == driver.results(out)


def test_folder_that_stops_being_writable(study, undisturbed, tmp_path):
    out = tmp_path / "out"
    process = driver.start(study, out, before=_without_powers(), fault=driver.SLOW)
    driver.wait_for_files(process, out)
    (out / "points").chmod(0o555)
    status, _, said = driver.finish(process)
    _ended_in_words(status, said, out, "cannot be written: Permission denied")
    before = driver.reported(out)
    assert before
    (out / "points").chmod(0o755)
    _same_after(study, out, undisturbed)
    assert before.items() <= driver.reported(out).items()


def test_second_run_in_a_folder_is_refused_and_the_first_goes_on(study, undisturbed, tmp_path):
    out = tmp_path / "out"
    first = driver.start(study, out, fault=driver.SLOW)
    driver.wait_for_files(first, out)
    status, _, said = driver.run(study, out, "--fresh")
    assert (4, f"{out} is in use by process {first.pid} on {socket.gethostname()}; wait for it, or choose another --out\n") == (status, said)
    assert (0, "") == (driver.finish(first)[0], "")
    assert driver.results(undisturbed) == driver.results(out)


def test_of_runs_that_meet_at_a_stale_lock_one_works(undisturbed, study, tmp_path):
    """Each finds the lock of a dead process; no two may take it over."""
    out = tmp_path / "out"
    shutil.copytree(undisturbed, out)
    (out / "points" / "000001.parquet").unlink()
    (out / ".lock").write_text(json.dumps({"host": socket.gethostname(), "process": 2**22 - 1, "started": "1"}))
    ended = [driver.finish(process) for process in [driver.start(study, out) for _ in range(3)]]
    assert {0, 4} >= {status for status, _, _ in ended}
    assert 0 in {status for status, _, _ in ended}
    assert all("is in use by" in said for status, _, said in ended if status == 4)
    assert driver.SIZE + 8192 == driver.rows_computed(out)
    assert driver.results(undisturbed) == driver.results(out)


def test_clock_that_goes_backwards(study, undisturbed, tmp_path):
    status, _, said = driver.run(study, tmp_path / "out", fault="clock")
    assert (0, "") == (status, said)
    assert "earlier by" in (tmp_path / "out" / "log.jsonl").read_text(), "the clock was not turned back"
    assert driver.results(undisturbed) == driver.results(tmp_path / "out")


def test_patches_reach_nothing_in_the_product():
    """No test hook stands in the program."""
    for path in Path("sweep").rglob("*.py"):
        assert "SWEEP_FAULT" not in path.read_text()
