"""Canonical JSON, whole files, named streams, and how faults read."""

import numpy as np
import pytest

from sweep.base.errors import Fault, StudyError, SurroundingsError
from sweep.base.records import canonical, digest, write_whole
from sweep.base.seeds import stream


def test_canonical():
    assert '{"a": [1, null, 0.1], "b": "x"}' == canonical({"b": "x", "a": (1, float("nan"), 0.1)})
    assert digest({"a": 1, "b": 2}) == digest({"b": 2, "a": 1})
    assert digest({"a": 1}) != digest({"a": 2})


def test_write_whole(tmp_path):
    write_whole(tmp_path / "deep" / "a.json", "{}")
    assert ["a.json"] == [p.name for p in (tmp_path / "deep").iterdir()]
    assert "{}" == (tmp_path / "deep" / "a.json").read_text()


def test_write_where_a_folder_stands(tmp_path):
    (tmp_path / "a").mkdir()
    with pytest.raises(SurroundingsError, match="cannot be written"):
        write_whole(tmp_path / "a", "x")
    assert ["a"] == [p.name for p in tmp_path.iterdir()]


def test_streams_are_named():
    first = stream(0, "plan", 3).random(4)
    np.testing.assert_array_equal(first, stream(0, "plan", 3).random(4))
    assert not np.array_equal(first, stream(1, "plan", 3).random(4))
    assert not np.array_equal(first, stream(0, "plan", 4).random(4))


def test_fault_reads():
    fault = Fault("slow.toml", 14, "variables.dosing_time.from", '"20 K"', 'a time, such as "20 min"', "it is a time")
    text = str(StudyError((fault,)))
    assert text.startswith('slow.toml:14  variables.dosing_time.from\n  found     "20 K"\n  expected  a time')
    assert text.endswith("1 fault")
