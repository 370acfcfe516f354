"""Files that are cut at any byte or have any bit turned: never taken for what was written, and computed again to the same bytes."""

import contextlib
import json
import shutil

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from sweep import report
from sweep.base.errors import SweepError
from sweep.plan import planned
from sweep.runner import Store, read_manifest, read_points
from sweep.study import read_study
from tests.faults import driver

RULES = settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow])
PLACE = st.integers(0, 2**63)
ANSWERS = ("summary.json", "analyses/window_boundary.csv", "analyses/batch_time.csv", "analyses/limits.csv")


@pytest.fixture(scope="module")
def held(study, undisturbed, tmp_path_factory):
    """Return a copy of the results to be damaged, with its study and plan."""
    out = tmp_path_factory.mktemp("held") / "out"
    shutil.copytree(undisturbed, out)
    read = read_study(study)
    return out, read, planned(read)


@contextlib.contextmanager
def _damaged(path, cut, place):
    """Cut a file at a place, or turn a bit there; put it back afterwards."""
    whole = path.read_bytes()
    data = bytearray(whole)
    if cut:
        del data[place % len(data) :]
    else:
        data[place // 8 % len(data)] ^= 1 << place % 8
    path.write_bytes(bytes(data))
    try:
        yield whole
    finally:
        path.write_bytes(whole)


@RULES
@given(number=st.integers(0, driver.FILES - 1), cut=st.booleans(), place=PLACE)
def test_points_that_are_damaged_are_known_and_never_read(held, number, cut, place):
    out, study, plan = held
    with _damaged(out / "points" / f"{number:06d}.parquet", cut, place):
        with Store(out, study, plan) as store:
            assert [8192 * number] == store.missing()
        with pytest.raises(SweepError, match=rf"{number:06d}\.parquet is damaged"):
            list(read_points(out, plan.size))


@RULES
@given(name=st.sampled_from(ANSWERS), cut=st.booleans(), place=PLACE)
def test_answers_that_are_damaged_are_known_and_never_shown(held, name, cut, place):
    out, study, plan = held
    with _damaged(out / name, cut, place):
        with Store(out, study, plan) as store:
            assert not store.whole(name)
        with pytest.raises(SweepError, match=r"is damaged|cannot be read"):
            report.make(out)


@RULES
@given(cut=st.booleans(), place=PLACE)
def test_manifest_that_is_damaged_is_refused_or_says_the_same(held, cut, place):
    """A turned bit may fall on a space between two entries."""
    out, study, plan = held
    before = read_manifest(out)
    with _damaged(out / "manifest.json", cut, place):
        try:
            with Store(out, study, plan) as store:
                kept = before.keys() - {"digest"}
                assert {key: before[key] for key in kept} == {key: store.manifest[key] for key in kept}
                assert [] == store.missing()
        except SweepError as error:
            assert "--fresh" in str(error)


def test_damage_is_computed_again_to_the_same_bytes(study, undisturbed, tmp_path):
    out = tmp_path / "out"
    shutil.copytree(undisturbed, out)
    points, analyses = out / "points", out / "analyses"
    with (
        _damaged(points / "000002.parquet", False, 12_345), _damaged(points / "000004.parquet", True, 999),
        _damaged(analyses / "window_grid.csv", False, 4_321), _damaged(out / "summary.json", True, 77),
    ):  # fmt: skip
        (points / ".000003.parquet.4711").write_bytes(b"half")
        (out / ".gitignore").write_text("*")
        status, _, said = driver.run(study, out)
        assert (0, "") == (status, said)
        assert driver.results(undisturbed) == driver.results(out)
        assert [".gitignore"] == [path.name for path in out.rglob(".*")], "what the program has not written is not its to remove"
    assert driver.SIZE + 8192 + driver.SIZE - 4 * 8192 == driver.rows_computed(out)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda path: path.unlink(), "holds points but no manifest.json"),
        (lambda path: path.write_text(json.dumps({**json.loads(path.read_text()), "schema": 2})), "schema 2, of a newer version"),
        (lambda path: path.write_bytes(path.read_bytes()[:-40]), "is damaged"),
    ],
    ids=["missing", "newer", "cut"],
)
def test_manifest_that_cannot_be_used_loses_nothing(held, tmp_path, change, words):
    out, study, plan = held
    shutil.copytree(out, tmp_path / "out")
    change(tmp_path / "out" / "manifest.json")
    points = driver.results(tmp_path / "out")
    with pytest.raises(SweepError, match=rf"{words}.*--fresh moves"):
        Store(tmp_path / "out", study, plan)
    assert points == driver.results(tmp_path / "out")
    with Store(tmp_path / "out", study, plan, fresh=True) as store:
        assert driver.FILES == len(store.missing())
    assert points == driver.results(tmp_path / "out.1")
