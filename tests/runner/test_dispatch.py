"""Tasks in flight on a cluster, against a scheduler of a few lines that kills what it is told to kill."""

import time

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sweep.base.errors import SurroundingsError
from sweep.plan import planned
from sweep.plant import evaluate
from sweep.runner import dispatch, remote
from sweep.runner.dispatch import Dispatch, Watch, cut, named, whole
from sweep.study import read_text
from tests.texts import SMALL


class KilledError(Exception):
    """What the scheduler raises for a task that killed its workers."""

    def __init__(self, allowed_failures):
        self.allowed_failures = allowed_failures


class Promise:
    """The result of a task; `fails` of its first askings time out, as where a worker died after it had answered."""

    def __init__(self, scheduler, key, rows, fails):
        self.scheduler, self.key, self.rows, self.fails = scheduler, key, rows, fails

    def add_done_callback(self, call):
        self.scheduler.calls.append((call, self))

    def result(self, timeout):
        if self.fails:
            self.fails -= 1
            raise TimeoutError
        deadly = self.scheduler.deadly & set(self.rows.index)
        if deadly or (self.rows.index[0] in self.scheduler.innocent and len(self.rows) > 1):
            self.scheduler.kills += 1
            raise KilledError(self.scheduler.allowed_failures)
        if len(self.rows) == 1 and self.rows.index[0] in self.scheduler.unlucky:
            self.scheduler.unlucky.remove(self.rows.index[0])
            raise KilledError(self.scheduler.allowed_failures)
        return self.rows.assign(answer=self.rows.index)


class Scheduler:
    """Answers tasks last sent first, so that order is not relied on."""

    status = "running"

    def __init__(self, deadly=(), innocent=(), unlucky=(), fails=0, threads=2, allowed_failures=3):
        """innocent: rows whose tasks die while they are not alone; unlucky: rows that die alone, once."""
        self.deadly, self.innocent, self.unlucky, self.fails, self.threads = set(deadly), set(innocent), set(unlucky), fails, threads
        self.allowed_failures = allowed_failures
        self.calls, self.most, self.keys, self.kills, self.cancelled = [], 0, [], 0, None

    def submit(self, work, packed, expected, rows, key, pure):
        assert work is remote.work
        assert remote.depends_on() == expected
        self.keys.append(key)
        return Promise(self, key, rows, self.fails)

    def nthreads(self, callback_timeout):
        self.most = max(self.most, len(self.calls))
        while self.calls:
            call, promise = self.calls.pop()
            call(promise)
        return {"worker": self.threads} if self.threads else {}

    def cancel(self, futures, force):
        self.cancelled = len(futures)


class AlwaysAsked(Watch):
    """Asks at every look."""

    def look(self, suspects=()):
        self._asked = 0.0
        super().look(suspects)


@pytest.fixture(scope="module")
def study():
    return read_text(SMALL)


@pytest.fixture
def small(monkeypatch):
    monkeypatch.setattr(dispatch, "LARGEST", 16)
    monkeypatch.setattr(dispatch, "SMALLEST", 4)
    monkeypatch.setattr(dispatch, "crashed", lambda study, rows: rows.assign(answer=-1))


def _tables(study, scheduler, told=None, noted=None):
    watch = AlwaysAsked(scheduler, "tcp://there:1", 5.0, set)
    watch.wait()
    say, note = (told if told is not None else []).append, noted if noted is not None else lambda **_: None
    plan = planned(study)
    there = Dispatch(scheduler, watch, KilledError, study, plan, say, note)
    return whole(there.tables([0, 200, 400], 200), [0, 200, 400], 200, plan.size)


def test_every_row_comes_once_in_whole_stretches_with_few_tasks_in_flight(study, small):
    scheduler = Scheduler()
    found = dict(_tables(study, scheduler))
    assert {0, 200, 400} == set(found)
    for start, table in found.items():
        assert list(range(start, start + 200)) == list(table.index) == list(table["answer"])
    assert 8 == scheduler.most  # 4 for each of 2 threads
    assert 39 == len(scheduler.keys) == len(set(scheduler.keys))
    assert 0 == scheduler.cancelled


def test_deadly_points_are_found_and_given_up_and_all_others_computed(study, small):
    told, noted = [], []
    scheduler = Scheduler(deadly={0, 7, 333, 599}, innocent={0, 32, 200})
    found = pd.concat([table for _, table in sorted(_tables(study, scheduler, told, lambda **entry: noted.append(entry)))])
    assert [k if k not in {0, 7, 333, 599} else -1 for k in range(600)] == list(found["answer"])
    assert [0, 7, 333, 599] == sorted(entry["start"] for entry in noted if entry["what"] == "point given up")
    assert "plan row 333 kills every worker that it is given to: given up, a failed row" in told
    assert any(line.startswith("plan rows 328 to 343 killed") for line in told)
    assert len(set(scheduler.keys)) == len(scheduler.keys)


def test_point_is_blamed_only_where_it_has_killed_two_workers_alone(study, small):
    noted = []
    scheduler = Scheduler(deadly={7}, unlucky={6}, allowed_failures=0)
    found = pd.concat([table for _, table in sorted(_tables(study, scheduler, noted=lambda **entry: noted.append(entry)))])
    assert [k if k != 7 else -1 for k in range(600)] == list(found["answer"])
    assert not scheduler.unlucky
    assert [7] == [entry["start"] for entry in noted if entry["what"] == "point given up"]
    assert [(7, 1)] * 2 == [(entry["start"], entry["workers"]) for entry in noted if entry["what"] == "workers died" and entry["start"] == 7]


def test_point_that_killed_several_workers_is_not_given_more(study, small):
    scheduler = Scheduler(deadly={7}, allowed_failures=3)
    list(_tables(study, scheduler))
    assert 1 == sum("-7-8-" in key for key in scheduler.keys)


def test_suspects_wait_until_the_rest_is_done(study, small):
    order = [start for start, _ in _tables(study, Scheduler(deadly={3}))]
    assert 0 == order[-1]


def test_program_that_kills_everywhere_is_given_up_before_long(study, small, monkeypatch):
    monkeypatch.setattr(dispatch, "GUILTY", 3)
    scheduler = Scheduler(deadly=range(600))
    with pytest.raises(SurroundingsError, match=r"more than 3 points kill every worker .*plan rows \d+, \d+, \d+, \d+"):
        list(_tables(study, scheduler))
    assert scheduler.kills < 30


def test_result_lost_with_its_worker_is_asked_for_again(study, small):
    found = dict(_tables(study, Scheduler(fails=1)))
    assert 600 == sum(map(len, found.values()))


def test_what_is_in_flight_is_cancelled_where_the_reader_stops(study, small):
    scheduler = Scheduler()
    tables = _tables(study, scheduler)
    next(tables)
    tables.close()
    assert 0 < scheduler.cancelled <= 8


def test_newcomers_are_greeted_until_they_answer():
    greeted = []

    def greet(workers):
        greeted.append(workers)
        return workers if len(greeted) == 2 else set()

    watch = AlwaysAsked(Scheduler(), "tcp://there:1", 5.0, greet)
    for _ in range(3):
        watch.look()
    assert [{"worker"}, {"worker"}] == greeted


def test_no_worker_is_waited_for_and_suspects_are_named():
    scheduler = Scheduler()
    watch = AlwaysAsked(scheduler, "tcp://there:1", 0.2, set)
    watch.wait()
    scheduler.threads = 0
    with pytest.raises(SurroundingsError, match=r"tcp://there:1 has had no worker for 0 s; under suspicion .*: rows 0 to 15, 32 to 47; the points"):
        for _ in range(1000):
            watch.look([(32, 48), (0, 16)])
            time.sleep(0.01)


@given(st.integers(0, 40), st.integers(1, 3000), st.integers(1, 9000), st.integers(0, 300))
def test_tasks_cover_every_row_once_and_stay_in_bounds(first, files, total, threads):
    size = 300
    starts = [start for start in range(0, total, size) if start // size >= first][:files]
    tasks = list(cut(starts, size, total, threads))
    assert [k for start in starts for k in range(start, min(start + size, total))] == [k for a, b in tasks for k in range(a, b)]
    assert all(0 < b - a <= dispatch.LARGEST for a, b in tasks)


def test_tasks_are_sized_by_the_plan_and_the_threads():
    assert {(0, 2048), (2048, 4096)} <= set(cut(list(range(0, 10**6, 8192)), 8192, 10**6, 100))
    assert [128] * 16 == [b - a for a, b in cut([0], 8192, 2048, 1000)]
    assert [256] * 8 == [b - a for a, b in cut([0], 8192, 2048, 2)]


@pytest.mark.parametrize(
    ("words", "tasks"),
    [("row 7", [(7, 8)]), ("rows 0 to 127", [(0, 128)]), ("rows 0 to 127, 256", [(256, 257), (0, 128)])],
)
def test_rows_in_words(words, tasks):
    assert words == named(tasks)


def test_crashed_rows_have_the_columns_of_evaluated_ones(study):
    from sweep.plant import crashed

    rows = planned(study).rows(5, 7)
    good, bad = evaluate(study, rows), crashed(study, rows)
    assert list(good.dtypes.items()) == list(bad.dtypes.items())
    assert ["failed", "failed"] == list(bad["status"])
    assert bad["reason"].str.contains("crashed").all()
    assert bad.drop(columns=["status", "reason", *rows.columns]).isna().all(axis=None)
    pd.testing.assert_frame_equal(rows, bad[list(rows.columns)])
