"""A results folder: resumed, locked, refused, moved aside; nothing half-written is taken for whole."""

import json
import os
import subprocess
import sys

import pandas as pd
import pyarrow.parquet as pq
import pytest

from sweep.base.errors import ForeignResultsError, SurroundingsError
from sweep.plan import planned
from sweep.runner import Store, read_points, store, sweep_points
from sweep.runner.manifest import sealed
from sweep.study import read_text
from tests.texts import SMALL


@pytest.fixture(scope="module")
def study():
    return read_text(SMALL)


@pytest.fixture
def small_files(monkeypatch):
    from sweep.runner import run

    monkeypatch.setattr(store, "ROWS", 128)
    monkeypatch.setattr(run, "ROWS", 128)


def _digests(folder):
    return {p.name: p.read_bytes() for p in sorted((folder / "points").glob("*.parquet"))}


def _run(folder, study, workers=1):
    with Store(folder, study, planned(study)) as open_store:
        return sweep_points(open_store, workers)


def test_files_hold_the_plan_with_units(tmp_path, study, small_files):
    assert planned(study).size == _run(tmp_path, study)
    tables = list(read_points(tmp_path, planned(study).size))
    assert [128, 128, 128, 128, 88] == [len(t) for t in tables]
    assert list(range(600)) == list(pd.concat(tables).index)
    schema = pq.read_schema(tmp_path / "points" / "000000.parquet")
    assert b"K" == schema.field("max_temperature_K").metadata[b"unit"]
    assert b"mol/m^3" == schema.field("dose").metadata[b"unit"]


def test_resume_computes_only_what_is_missing_and_ends_in_the_same_bytes(tmp_path, study, small_files):
    _run(tmp_path / "whole", study)
    _run(tmp_path / "broken", study, workers=2)
    files = sorted((tmp_path / "broken" / "points").iterdir())
    files[1].unlink()
    files[3].write_bytes(files[3].read_bytes()[:100])
    (tmp_path / "broken" / "points" / ".000004.parquet.99").write_bytes(b"half")
    assert 256 == _run(tmp_path / "broken", study)
    assert _digests(tmp_path / "whole") == _digests(tmp_path / "broken")
    assert 0 == _run(tmp_path / "broken", study)


def test_one_flipped_bit_is_computed_again(tmp_path, study, small_files):
    _run(tmp_path, study)
    file = tmp_path / "points" / "000002.parquet"
    data = bytearray(file.read_bytes())
    data[len(data) // 2] ^= 1
    file.write_bytes(bytes(data))
    assert 128 == _run(tmp_path, study)


def test_damaged_file_is_named(tmp_path, study, small_files):
    _run(tmp_path, study)
    (tmp_path / "points" / "000001.parquet").write_bytes(b"nothing")
    with pytest.raises(SurroundingsError, match=r"000001\.parquet is damaged"):
        list(read_points(tmp_path, 600))


def test_another_study_is_refused_and_nothing_is_lost(tmp_path, study):
    _run(tmp_path, study)
    before = _digests(tmp_path)
    other = read_text(SMALL.replace("conversion = 0.9", "conversion = 0.8"))
    with pytest.raises(ForeignResultsError, match="another study"):
        _run(tmp_path, other)
    assert before == _digests(tmp_path)


def test_other_versions_are_refused_with_what_changed(tmp_path, study):
    _run(tmp_path, study)
    manifest = json.loads((tmp_path / "manifest.json").read_text())
    manifest["versions"]["numpy"] = "1.0"
    (tmp_path / "manifest.json").write_text(json.dumps(sealed(manifest)))
    with pytest.raises(ForeignResultsError, match=r"numpy: 1\.0 then"):
        _run(tmp_path, study)


def test_fresh_moves_aside_and_deletes_nothing(tmp_path, study):
    folder = tmp_path / "results"
    _run(folder, study)
    before = _digests(folder)
    for number in (1, 2):
        with Store(folder, study, planned(study), fresh=True) as open_store:
            sweep_points(open_store, 1)
        assert before == _digests(tmp_path / f"results.{number}")


def test_two_runs_in_one_folder_are_refused(tmp_path, study):
    with Store(tmp_path, study, planned(study)), pytest.raises(SurroundingsError, match=f"process {os.getpid()}"):
        Store(tmp_path, study, planned(study))
    Store(tmp_path, study, planned(study)).__exit__()


def test_lock_of_a_dead_process_is_taken_over(tmp_path, study):
    gone = subprocess.run([sys.executable, "-c", "import os; print(os.getpid())"], capture_output=True, text=True, check=True)
    import socket

    (tmp_path / ".lock").write_text(json.dumps({"host": socket.gethostname(), "process": int(gone.stdout), "started": "1"}))
    assert 600 == _run(tmp_path, study)
    assert not (tmp_path / ".lock").exists()


def test_lock_of_another_machine_is_respected(tmp_path, study):
    (tmp_path / ".lock").write_text(json.dumps({"host": "elsewhere", "process": 1, "started": "1"}))
    with pytest.raises(SurroundingsError, match="elsewhere"):
        Store(tmp_path, study, planned(study))


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("{", "is damaged: .*--fresh"),
        ("[]", "lists no files; --fresh"),
        ('{"schema": 99}', "schema 99, of a newer version.*--fresh"),
        ('{"schema": 1, "files": {}}', "lists no files; --fresh"),
        ("[" * 100_000, "is damaged: .*--fresh"),
    ],
    ids=["cut", "a list", "newer", "without analyses", "deep"],
)
def test_manifest_that_cannot_be_used(tmp_path, study, text, words):
    (tmp_path / "manifest.json").write_text(text)
    with pytest.raises(SurroundingsError, match=words):
        Store(tmp_path, study, planned(study))
    assert not (tmp_path / ".lock").exists()


def test_points_without_a_manifest_are_not_taken(tmp_path, study):
    _run(tmp_path, study)
    (tmp_path / "manifest.json").unlink()
    with pytest.raises(SurroundingsError, match="no manifest"):
        Store(tmp_path, study, planned(study))


def test_folder_that_cannot_be_made(tmp_path, study):
    (tmp_path / "file").write_text("")
    with pytest.raises(SurroundingsError, match="cannot be written"):
        Store(tmp_path / "file" / "results", study, planned(study))


def test_progress_counts_to_the_end(tmp_path, study, small_files):
    seen = []
    with Store(tmp_path, study, planned(study)) as open_store:
        sweep_points(open_store, 1, seen.append)
    assert [128, 256, 384, 512, 600] == [p.done for p in seen]
    assert {600} == {p.total for p in seen}
    assert all(p.rate > 0.0 for p in seen)
