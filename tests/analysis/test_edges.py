"""Distances from a point to the first edge each way, against closed forms."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sweep.analysis.window.edges import edges


class Counted:
    """Margins, a function of the points (M, D) a limit; keeps every call."""

    def __init__(self, *limits):
        self.limits, self.asked = limits, []

    def __call__(self, points):
        self.asked.append(points)
        return np.stack([limit(points) for limit in self.limits], axis=-1)


def listed(found):
    return {(edge.axis, edge.direction): (edge.distance, edge.limit) for edge in found.edges}


def test_box():
    margins = Counted(lambda p: 0.83 - p[:, 0], lambda p: p[:, 0] - 0.1234, lambda p: 5.0 * (0.9 - p[:, 1]))
    found = edges(margins, np.array([0.4, 0.6]))
    ways = listed(found)
    assert (0.43, 0) == (pytest.approx(ways[0, "up"][0], abs=1e-4), ways[0, "up"][1])
    assert (0.2766, 1) == (pytest.approx(ways[0, "down"][0], abs=1e-4), ways[0, "down"][1])
    assert (0.3, 2) == (pytest.approx(ways[1, "up"][0], abs=1e-4), ways[1, "up"][1])
    assert (None, None) == ways[1, "down"]
    assert [0.43, 0.2766, 1.5] == pytest.approx(found.margins.tolist())
    assert (True, None) == (found.holds, found.reason)


def test_distance_is_to_a_point_that_holds():
    at = np.array([0.4, 0.6])
    margins = Counted(lambda p: 0.25 - np.hypot(p[:, 0] - 0.45, p[:, 1] - 0.55))
    for (axis, direction), (distance, _) in listed(edges(margins, at)).items():
        there = at + distance * (1 if direction == "up" else -1) * np.eye(2)[axis]
        assert 0.0 <= margins(there[None])[0, 0] <= 1e-4


def test_few_large_calls():
    margins = Counted(lambda p: 0.83 - p[:, 0], lambda p: 0.9 - p[:, 1])
    found = edges(margins, np.array([0.4, 0.6]))
    assert sum(map(len, margins.asked)) == found.marches
    assert 600 >= found.marches
    assert 4 * 128 == max(map(len, margins.asked))
    assert 5 >= len(margins.asked)


def test_first_edge_counts_where_there_are_several():
    margins = Counted(lambda p: np.abs(p[:, 0] - 0.7) - 0.05)
    assert 0.15 == pytest.approx(listed(edges(margins, np.array([0.5])))[0, "up"][0], abs=1e-4)


@pytest.mark.parametrize("dip", [lambda p: np.abs(p[:, 0] - 0.705) - 0.0012, lambda p: (p[:, 0] - 0.705) ** 2 - 0.0012**2])
def test_dip_between_two_scanned_points_is_an_edge(dip):
    """0.705 lies midway between scanned points 0.0039 apart, and the dip is narrower than that."""
    ways = listed(edges(Counted(dip), np.array([0.5])))
    assert (0.2038, 0) == (pytest.approx(ways[0, "up"][0], abs=1e-4), ways[0, "up"][1])


def test_nearest_of_two_dips_counts():
    """Two dips narrower than the scan, and an edge beyond both."""

    def dips(p):
        return np.minimum(np.abs(p[:, 0] - 0.705), np.abs(p[:, 0] - 0.6035)) - 0.0012

    ways = listed(edges(Counted(dips, lambda p: 0.9 - p[:, 0]), np.array([0.5])))
    assert (0.1023, 0) == (pytest.approx(ways[0, "up"][0], abs=1e-4), ways[0, "up"][1])


def test_dip_beyond_an_edge_does_not_count():
    margins = Counted(lambda p: np.abs(p[:, 0] - 0.65) - 0.02, lambda p: np.abs(p[:, 0] - 0.705) - 0.0012)
    assert (0.13, 0) == (pytest.approx(listed(edges(margins, np.array([0.5])))[0, "up"][0], abs=1e-4), 0)


def test_no_value_is_an_edge():
    found = edges(Counted(lambda p: 1.0 - p[:, 0], lambda p: np.where(p[:, 0] > 0.8, np.nan, 1.0)), np.array([0.5]))
    assert (0.3, 1) == (pytest.approx(listed(found)[0, "up"][0], abs=1e-4), listed(found)[0, "up"][1])


@pytest.mark.parametrize(("value", "text"), [(-1.0, "does not hold"), (np.nan, "does not hold")])
def test_point_that_does_not_hold_has_no_distances(value, text):
    margins = Counted(lambda p: np.full(len(p), value))
    found = edges(margins, np.array([0.4, 0.6]))
    assert not found.holds
    assert text in found.reason
    assert {(None, None)} == set(listed(found).values())
    assert 4 == len(found.edges)
    assert 1 == found.marches


def test_point_outside_the_range_keeps_its_margins():
    margins = Counted(lambda p: 2.0 - p[:, 0])
    found = edges(margins, np.array([1.2, 0.5]))
    assert [[1.2, 0.5]] == margins.asked[0].tolist()
    assert [0.8] == pytest.approx(found.margins.tolist())
    assert (True, 1) == (found.holds, found.marches)
    assert "outside" in found.reason
    assert {(None, None)} == set(listed(found).values())


def test_point_on_the_border_looks_inwards_only():
    found = edges(Counted(lambda p: 0.7 - p[:, 0]), np.array([0.0, 1.0]))
    assert {(0, "down"): None, (1, "up"): None, (1, "down"): None} == {way: d for way, (d, _) in listed(found).items() if way != (0, "up")}
    assert 0.7 == pytest.approx(listed(found)[0, "up"][0], abs=1e-4)


def test_point_on_an_edge_is_no_way_from_it():
    assert (0.0, 0) == listed(edges(Counted(lambda p: 0.5 - p[:, 0]), np.array([0.5])))[0, "up"]


def test_nothing_beyond_the_border_is_evaluated():
    margins = Counted(lambda p: np.full(len(p), 1.0))
    edges(margins, np.array([0.1, 0.7]))
    asked = np.concatenate(margins.asked)
    assert [0.0, 1.0] == [asked.min(), asked.max()]


@settings(max_examples=60, deadline=None)
@given(st.floats(0.0, 1.0), st.floats(0.0, 1.0), st.floats(0.01, 0.8))
def test_disc_in_three_axes(x, y, radius):
    """From a point of a ball the way along an axis is a chord's part."""
    at, centre = np.array([x, y, 0.5]), np.array([0.5, 0.5, 0.5])
    found = edges(Counted(lambda p: radius - np.sqrt(np.sum((p - centre) ** 2, axis=1))), at)
    offset = at - centre
    assert (np.sqrt(np.sum(offset**2)) <= radius) == found.holds
    if not found.holds:
        return
    for (axis, direction), (distance, limit) in listed(found).items():
        half = np.sqrt(max(radius**2 - np.sum(offset**2) + offset[axis] ** 2, 0.0))
        way = half - offset[axis] if direction == "up" else half + offset[axis]
        room = 1.0 - at[axis] if direction == "up" else at[axis]
        if distance is None:
            assert way >= room - 1e-9
        else:
            assert (way, 0) == (pytest.approx(distance, abs=1.1e-4), limit)
