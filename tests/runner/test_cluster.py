"""A real scheduler and workers of separate processes: the same bytes as here, whatever dies, and clear words where it cannot be."""

import contextlib
import os
import re
import shutil
import signal
import socket
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import dask
import pandas as pd
import pytest
from distributed import LocalCluster

import sweep
from sweep.base.errors import SurroundingsError, SweepError
from sweep.cli.main import main
from sweep.plan import planned
from sweep.runner import Store, cluster, dispatch, read_points, remote, store, sweep_points
from sweep.runner.cluster import checked_address, on_cluster
from sweep.study import read_text
from sweep.workflow.run import run
from tests.texts import SMALL

SHORT = SMALL[: SMALL.index("[window]")].replace('mtsr = { at_most = "85 degC" }', "") + '[batch_time]\nlongest = "24 h"\n'

# What workers run first. dask reads such a file twice, so each takes what it replaces from where it was made.
SLOW = """
import os, pathlib, signal, time
from sweep.plant import evaluate
from sweep.runner import worker
flag = pathlib.Path(FLAG)
def slow(study, points):
    if flag.exists() and int(flag.read_text()) in points.index:
        os.kill(os.getpid(), signal.SIGKILL)
    time.sleep(0.1)
    return evaluate(study, points)
worker.evaluate = slow
"""
ODD = """
import sys
from importlib.metadata import version
from sweep.runner import manifest
def dask_setup(worker):
    if worker.name == 0:
        manifest.version = lambda package: "1.26.0" if package == "numpy" else version(package)
    else:
        sys.modules["sweep.runner.remote"] = None
"""


# A LocalCluster closes for good a worker that is away 15 s after it was last lost, though it came back in between and was lost once more; `dask
# worker` does not. Forked workers start in a third of the time.
CONFIGURATION = {"distributed.deploy.lost-worker-timeout": "1 hour", "distributed.worker.multiprocessing-method": "forkserver"}


@contextlib.contextmanager
def _cluster(folder, workers=2, preload="", **options):
    """Start a scheduler here, and workers as processes of their own that run `preload` first."""
    file = folder / "preload.py"
    file.write_text(preload.replace("FLAG", repr(str(folder / "deadly"))))
    more = {"preload": [str(file)]} if preload else {}
    places = {"host": "127.0.0.1", "dashboard_address": "127.0.0.1:0"}
    with (
        dask.config.set(CONFIGURATION),
        LocalCluster(n_workers=workers, threads_per_worker=1, processes=True, **places, **more, **options) as started,
    ):
        yield started


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("shared")


@pytest.fixture(scope="module")
def started(folder):
    with _cluster(folder, preload=SLOW) as started:
        yield started


@pytest.fixture
def shared(started):
    """The cluster of this module, both of its workers up again after the test before."""
    started.wait_for_workers(2, timeout=60)
    return started


@pytest.fixture(scope="module")
def study():
    return read_text(SHORT)


@pytest.fixture
def here(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "short.toml").write_text(SHORT)
    return tmp_path


@pytest.fixture
def small_files(monkeypatch):
    """Files of 128 rows, tasks of 64."""
    from sweep.runner import run as points

    for module, name, value in ((store, "ROWS", 128), (points, "ROWS", 128), (dispatch, "LARGEST", 64), (dispatch, "SMALLEST", 16)):
        monkeypatch.setattr(module, name, value)


@pytest.fixture
def impatient():
    with dask.config.set({"distributed.comm.timeouts.connect": "2s"}):
        yield


def _run(folder, study, address=None, watcher=None, told=None):
    with Store(folder, study, planned(study)) as open_store:
        return sweep_points(open_store, 1, watcher, address, (told if told is not None else []).append)


def _points(folder):
    return {p.name: p.read_bytes() for p in sorted((folder / "points").iterdir())}


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory, study):
    """The files of a run on this machine, 128 rows each."""
    from sweep.runner import run as points

    folder = tmp_path_factory.mktemp("undisturbed")
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(store, "ROWS", 128)
        patch.setattr(points, "ROWS", 128)
        _run(folder, study)
    return _points(folder)


def _pids(started):
    return [nanny.pid for nanny in started.workers.values() if nanny.pid]


def test_run_on_a_cluster_gives_the_bytes_of_a_run_here(here, study, shared, capsys):
    assert 0 == main(["run", "short.toml", "--cluster", shared.scheduler_address])
    said = capsys.readouterr()
    assert f"cluster {shared.scheduler_address}: 2 workers, 2 threads\n" in said.err
    assert "600 of 600 points" in said.err
    assert "600 points (factorial): 600 done" in said.out
    run(sweep.read_study("short.toml"), "here", workers=1, figures=False)
    for part in ("summary.json", "points", "analyses"):
        files = [here / "here" / part] if part.endswith("json") else sorted((here / "here" / part).iterdir())
        assert files
        for file in files:
            assert file.read_bytes() == (here / "results" / "short" / file.relative_to(here / "here")).read_bytes(), file


def test_killed_workers_lose_nothing(tmp_path, study, shared, small_files, undisturbed):
    seen = []

    def kill(progress):
        seen.append(progress.done)
        if len(seen) in (1, 3):  # one; all, so that there is none until the first is back
            for pid in _pids(shared)[: len(seen)]:
                os.kill(pid, signal.SIGKILL)

    assert 600 == _run(tmp_path, study, shared.scheduler_address, kill)
    assert 600 == seen[-1]
    assert undisturbed == _points(tmp_path)


def test_point_that_kills_its_workers_is_a_failed_row(tmp_path, study, folder, shared, small_files, undisturbed, monkeypatch):
    told = []
    monkeypatch.setattr(shared.scheduler, "allowed_failures", 0)  # four workers in all, not twelve
    (folder / "deadly").write_text("333")
    try:
        assert 600 == _run(tmp_path / "out", study, shared.scheduler_address, told=told)
    finally:
        (folder / "deadly").unlink()
    table = pd.concat(read_points(tmp_path / "out", 600))
    assert [333] == list(table.index[table["status"] == "failed"])
    assert "crashed" in table["reason"][333]
    assert "plan row 333 kills every worker that it is given to: given up, a failed row" in told
    after = _points(tmp_path / "out")
    assert ["000002.parquet"] == [name for name in undisturbed if undisturbed[name] != after[name]]
    assert '"what": "point given up"' in (tmp_path / "out" / "log.jsonl").read_text()


def test_cluster_that_goes_away_leaves_a_run_that_goes_on_here(tmp_path, study, small_files, undisturbed):
    words = r"went away.*the points that are done stay"
    with _cluster(tmp_path, workers=1, preload=SLOW) as started, pytest.raises(SurroundingsError, match=words) as ended:
        _run(tmp_path / "out", study, started.scheduler_address, lambda _: started.close())
    assert 4 == ended.value.exit_status
    done = {name: data for name, data in _points(tmp_path / "out").items() if not name.startswith(".")}
    assert 0 < len(done) < 5
    assert not (tmp_path / "out" / ".lock").exists()
    assert 600 - 128 * len(done) + 40 * ("000004.parquet" in done) == _run(tmp_path / "out", study)
    assert undisturbed == _points(tmp_path / "out")


def _worker(address):
    """Start a worker that nobody starts again."""
    call = [sys.executable, "-m", "dask", "worker", address, "--no-nanny", "--nthreads", "1", "--no-dashboard"]
    return subprocess.Popen(call, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)


def test_last_worker_that_dies_for_good_ends_the_run_in_words_and_it_goes_on_here(tmp_path, study, impatient, small_files, undisturbed):
    words = r"has had no worker for 2 s; under suspicion of having killed them: rows \d+ to \d+.*; the points that are done stay"
    with _cluster(tmp_path, workers=0) as started:
        worker = _worker(started.scheduler_address)
        started.wait_for_workers(1, timeout=60)
        with pytest.raises(SurroundingsError, match=words) as ended:
            _run(tmp_path / "out", study, started.scheduler_address, lambda _: worker.kill())
        assert 4 == ended.value.exit_status
        assert -signal.SIGKILL == worker.wait(10)
    assert 600 - 128 == _run(tmp_path / "out", study)
    assert undisturbed == _points(tmp_path / "out")


def _begun(folder, address, study=SHORT):
    """Start a long run as a user does, and return its process once a file of points is there."""
    (folder / "long.toml").write_text(study.replace("levels = 20", "levels = 400").replace("levels = 30", "levels = 400"))
    call = [sys.executable, "-m", "sweep.cli.main", "run", "long.toml", "--cluster", address]
    process = subprocess.Popen(call, stderr=subprocess.PIPE, text=True)
    until = time.monotonic() + 120.0
    while time.monotonic() < until and process.poll() is None and not any((folder / "results" / "long" / "points").glob("0*.parquet")):
        time.sleep(0.05)
    return process


@pytest.mark.skipif(sys.platform == "win32", reason="signals as POSIX has them")
def test_interrupted_run_leaves_the_cluster_free(here, shared):
    process = _begun(here, shared.scheduler_address)
    process.send_signal(signal.SIGINT)
    _, said = process.communicate(timeout=60)
    assert 3 == process.returncode
    assert "goes on where it stopped" in said
    assert not (here / "results" / "long" / ".lock").exists()
    until = time.monotonic() + 20.0
    while shared.scheduler.tasks and time.monotonic() < until:
        time.sleep(0.1)
    assert 0 == len(shared.scheduler.tasks)
    assert 2 == len(shared.scheduler.workers)


@pytest.mark.long
def test_scheduler_that_is_killed_ends_the_run_in_words(here):
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        address = f"tcp://127.0.0.1:{free.getsockname()[1]}"
    dask_at = [sys.executable, "-m", "dask"]
    quiet = {"stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL}
    options = ["--dashboard-address", "127.0.0.1:0"]
    scheduler = subprocess.Popen([*dask_at, "scheduler", "--host", "127.0.0.1", "--port", address.rpartition(":")[2], *options], **quiet)
    workers = subprocess.Popen([*dask_at, "worker", address, "--nworkers", "2", "--nthreads", "1", *options], **quiet)
    try:
        process = _begun(here, address)
        scheduler.kill()
        _, said = process.communicate(timeout=60)
        assert 4 == process.returncode
        assert f"the cluster at {address} went away: " in said
        assert "the points that are done stay" in said
    finally:
        for each in (scheduler, workers):
            each.terminate()
            each.wait(30)


def test_workers_that_differ_are_refused_by_name(here, capsys):
    with _cluster(here, preload=ODD) as started:
        assert 4 == main(["run", "short.toml", "--cluster", started.scheduler_address])
        zero, one = (re.escape(started.scheduler.aliases[name]) for name in (0, 1))
    said = capsys.readouterr().err
    assert "workers differ from this machine: " in said
    assert re.search(rf"{zero} has numpy 1\.26\.0 \(here [\d.]+\)[;]", said)
    assert re.search(rf"{one} cannot run the program \(ModuleNotFoundError", said)
    assert not list((here / "results" / "short").glob("points/*"))


def test_worker_that_joins_with_other_versions_does_no_work(study):
    with pytest.raises(SurroundingsError, match=r"joined during the run has numpy [\d.]+ \(here 9\.9\)"):
        remote.work(b"", {**remote.depends_on(), "numpy": "9.9"}, planned(study).rows(0, 2))


def test_what_a_worker_is_compared_in():
    names = set(remote.depends_on())
    assert {"sweep", "python", "machine", "numpy", "scipy", "pandas", "numba", "llvmlite", "dask", "distributed", "sweep's files"} == names
    assert ["numpy 2.0 (here 2.1)", "sweep's files missing (here 0a)"] == remote.differences(
        {"numpy": "2.1", "python": "3.11", "sweep's files": "0a"}, {"numpy": "2.0", "python": "3.11"}
    )


def test_nobody_at_the_address(here, impatient, capsys):
    begun = time.monotonic()
    assert 4 == main(["run", "short.toml", "--cluster", "tcp://127.0.0.1:1"])
    assert time.monotonic() - begun < 20.0
    assert re.search(r"no cluster can be reached at tcp://127\.0\.0\.1:1: .*; start it with `dask scheduler`", capsys.readouterr().err)


def test_worker_is_no_scheduler(shared, study, impatient):
    (worker, _) = shared.scheduler.workers
    with pytest.raises(SurroundingsError, match="a dask worker listens there, not a scheduler"):
        next(on_cluster(study, planned(study), [0], 600, worker))


@pytest.mark.parametrize("answer", [b"", b"HTTP/1.0 400 Bad request\r\n\r\n<!DOCTYPE HTML>"], ids=["silent", "a web server"])
def test_something_else_at_the_address(study, impatient, answer):
    begun = time.monotonic()
    with socket.create_server(("127.0.0.1", 0)) as server, ThreadPoolExecutor(1) as thread:
        held = []

        def talk():
            while True:
                try:
                    held.append(server.accept()[0])
                    held[-1].sendall(answer)
                except OSError:
                    return

        thread.submit(talk)
        try:
            with pytest.raises(SurroundingsError, match="no cluster can be reached"):
                next(on_cluster(study, planned(study), [0], 600, f"tcp://127.0.0.1:{server.getsockname()[1]}"))
        finally:
            server.shutdown(socket.SHUT_RDWR)
            for each in held:
                each.close()
    assert time.monotonic() - begun < 20.0


def test_cluster_without_workers(here, impatient, capsys):
    with _cluster(here, workers=0) as started:
        assert 4 == main(["run", "short.toml", "--cluster", started.scheduler_address])
    assert "has had no worker for 2 s; the points that are done stay" in capsys.readouterr().err


@pytest.mark.parametrize(
    "address", ["", "cluster", "tcp://", "tcp://host", "tcp://host:0", "tcp://host:70000", "http://host:8786", "host:8786/x", "a b:1"]
)
def test_address_that_is_none(here, address, capsys):
    assert 2 == main(["run", "short.toml", "--cluster", address])
    assert "expected tcp://HOST:PORT or tls://HOST:PORT" in capsys.readouterr().err
    assert not (here / "results").exists()


@pytest.mark.parametrize(
    ("address", "written"),
    [("tcp://a-b.c:8786", "tcp://a-b.c:8786"), ("10.0.0.7:8786", "tcp://10.0.0.7:8786"), (" tls://[fe80::1]:9 ", "tls://[fe80::1]:9")],
)
def test_addresses(address, written):
    assert written == checked_address(address)


def test_package_that_is_absent(here, monkeypatch, capsys):
    monkeypatch.setattr(cluster.importlib.util, "find_spec", lambda name: None)
    assert 2 == main(["run", "short.toml", "--cluster", "tcp://127.0.0.1:1"])
    assert "pip install '.[cluster]'" in capsys.readouterr().err
    assert not (here / "results").exists()


def test_dask_is_not_loaded_without_a_cluster():
    code = (
        "import sys\nimport sweep.runner.cluster, sweep.workflow.run\nsweep.runner.cluster.checked_address('tcp://a:1')\n"
        "print({'dask', 'distributed'} & set(sys.modules))"
    )
    assert "set()" == subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.strip()


def test_fault_of_the_call_is_the_workers_too(shared, study):
    from dataclasses import replace

    plan = replace(planned(study), columns=("dose", "nothing"))
    with pytest.raises(SweepError, match="nothing is neither a variable"):
        list(on_cluster(study, plan, [0], 600, shared.scheduler_address))


def _certificates(folder: Path) -> dict[str, str]:
    """Make an authority and a certificate signed by it; return dask's configuration of TLS."""
    ca, key, cert, ask = (str(folder / name) for name in ("ca.pem", "key.pem", "cert.pem", "ask.pem"))
    for command in (
        f"req -x509 -newkey ec -pkeyopt ec_paramgen_curve:prime256v1 -nodes -keyout {folder}/ca.key -out {ca} -days 2 -subj /CN=test",
        f"req -newkey ec -pkeyopt ec_paramgen_curve:prime256v1 -nodes -keyout {key} -out {ask} -subj /CN=localhost",
        f"x509 -req -in {ask} -CA {ca} -CAkey {folder}/ca.key -CAcreateserial -out {cert} -days 2",
    ):
        subprocess.run(["openssl", *command.split()], check=True, capture_output=True)
    tls = "distributed.comm.tls"
    files = {f"{role}.{part}": file for role in ("scheduler", "worker", "client") for part, file in (("key", key), ("cert", cert))}
    return {f"{tls}.ca-file": ca, **{f"{tls}.{name}": file for name, file in files.items()}}


@pytest.mark.skipif(shutil.which("openssl") is None, reason="certificates are made by openssl")
def test_tls_by_dasks_own_configuration(tmp_path, study, impatient, small_files, undisturbed):
    files = _certificates(tmp_path)
    with dask.config.set({**files, "distributed.comm.require-encryption": True}), _cluster(tmp_path, 1, protocol="tls://") as started:
        address = started.scheduler_address
        assert address.startswith("tls://")
        _run(tmp_path / "out", study, address)
        with pytest.raises(SurroundingsError, match="no cluster can be reached"):
            _run(tmp_path / "plain", study, address.replace("tls", "tcp"))
        with dask.config.set(dict.fromkeys(files)), pytest.raises(SurroundingsError, match="certificates come from dask's configuration"):
            _run(tmp_path / "bare", study, address)
        gone = {"distributed.comm.tls.ca-file": str(tmp_path / "gone.pem")}
        with dask.config.set(gone), pytest.raises(SurroundingsError, match=r"No such file.*certificates come"):
            _run(tmp_path / "gone", study, address)
    assert undisturbed == _points(tmp_path / "out")
