"""Marching squares on lattices small enough to draw by hand."""

import itertools

import numpy as np
import pytest

from sweep.analysis.window.boundary import Boundary, boundary_lines, inside, passed_cells, pieces_and_holes, safe_area

_AXIS = (np.arange(200) + 0.5) / 200
DENSE = np.stack(np.meshgrid(_AXIS, _AXIS, indexing="ij"), axis=-1).reshape(-1, 2)


def halfway(answers, joined, part=0.5) -> Boundary:
    """Return a boundary that crosses every edge in its middle, or at another part of it, seen from below or from the left."""
    answers = np.array(answers, dtype=bool)
    size = len(answers)
    node = np.stack(np.meshgrid(np.arange(size), np.arange(size), indexing="ij"), axis=-1).reshape(-1, 2)
    crossings = np.concatenate([node + part * np.eye(2)[axis] for axis in (0, 1)]) / (size - 1)
    joined = np.full((size - 1, size - 1), joined)
    return Boundary(answers, joined, crossings, np.zeros(len(crossings), dtype=np.int64), passed_cells(answers, joined))


def expected_cell(corners, joined):
    """Return area, number of lines and of pieces of one cell whose corners run counter-clockwise; a corner cut off halfway is an eighth."""
    count = sum(corners)
    if count == 2 and corners[0] == corners[2]:
        return (6 / 8, 2, 1) if joined else (2 / 8, 2, 2)
    return {0: (0.0, 0, 0), 1: (1 / 8, 1, 1), 2: (1 / 2, 1, 1), 3: (7 / 8, 1, 1), 4: (1.0, 0, 1)}[count]


@pytest.mark.parametrize("joined", [True, False])
@pytest.mark.parametrize("corners", list(itertools.product([True, False], repeat=4)))
def test_each_cell(corners, joined):
    a, b, c, d = corners
    boundary = halfway([[a, d], [b, c]], joined)
    area, lines, pieces = expected_cell(corners, joined)
    assert area == pytest.approx(safe_area(boundary), abs=1e-15)
    assert lines == len(boundary_lines(boundary))
    assert pieces == pieces_and_holes(boundary)[0]
    assert area == pytest.approx(inside(boundary, DENSE).mean(), abs=0.006)
    corner = np.array([[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]])
    assert list(corners) == inside(boundary, corner).tolist()


@pytest.mark.parametrize("part", [0.1, 0.3, 0.8])
@pytest.mark.parametrize("joined", [True, False])
@pytest.mark.parametrize("corners", list(itertools.product([True, False], repeat=4)))
def test_area_is_what_is_inside(corners, joined, part):
    a, b, c, d = corners
    boundary = halfway([[a, d], [b, c]], joined, part)
    assert safe_area(boundary) == pytest.approx(inside(boundary, DENSE).mean(), abs=0.006)


@pytest.mark.parametrize(("joined", "pieces", "holes", "lines"), [(True, 1, 2, 3), (False, 2, 1, 3)])
def test_saddle_in_a_figure_of_eight(joined, pieces, holes, lines):
    """Two rings that meet in one cell: joined they are one piece around two holes."""
    answers = np.zeros((8, 8), dtype=bool)
    answers[1:4, 1:4], answers[4:7, 4:7] = True, True
    answers[2, 2] = False
    if joined:
        answers[5, 5] = False
    boundary = halfway(answers, joined)
    assert (pieces, holes) == pieces_and_holes(boundary)
    found = boundary_lines(boundary)
    assert lines == len(found)
    assert all(line.closed for line in found)


def test_line_is_walked_once_and_in_order():
    (line,) = boundary_lines(halfway([[1, 1, 0], [1, 0, 0], [0, 0, 0]], False))
    assert not line.closed
    assert [[0.75, 0.0], [0.5, 0.25], [0.25, 0.5], [0.0, 0.75]] == line.points.tolist()
