"""Chemical equations, read and refused."""

import pytest

from sweep.study.equation import parse


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("2 A + B -> C", ({"A": 2.0, "B": 1.0}, {"C": 1.0}, False)),
        ("A <=> 0.5 B", ({"A": 1.0}, {"B": 0.5}, True)),
        ("A + R -> 2 R", ({"A": 1.0, "R": 1.0}, {"R": 2.0}, False)),
        ("A + A -> B", ({"A": 2.0}, {"B": 1.0}, False)),
        ("-> y", ({}, {"y": 1.0}, False)),
    ],
)
def test_parse(text, expected):
    assert expected == parse(text)


@pytest.mark.parametrize("text", ["", "A", "->", "A -> B -> C", "A - B -> C", "0 A -> B", "2A -> B", "A + -> B"])
def test_refused(text):
    with pytest.raises(ValueError, match=r"\S"):
        parse(text)
