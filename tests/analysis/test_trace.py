"""The tracer on made-up margins whose answer is known in closed form, against a dense check of every case."""

import dataclasses

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sweep.analysis.window.boundary import Line
from sweep.analysis.window.forecast import holding
from sweep.analysis.window.trace import AFFORDED, Trace, trace

_AXIS = (np.arange(701) + 0.5) / 701
DENSE = np.stack(np.meshgrid(_AXIS, _AXIS, indexing="ij"), axis=-1).reshape(-1, 2)


class Counted:
    """Margins from one function a limit, x and y -> margin; keeps every point it was asked for, call by call."""

    def __init__(self, *limits):
        self.limits, self.asked = limits, []

    def __call__(self, points):
        self.asked.append(points)
        return np.stack([limit(points[:, 0], points[:, 1]) for limit in self.limits], axis=-1)


def disc(x0, y0, radius):
    return lambda x, y: radius - np.hypot(x - x0, y - y0)


def outside(x0, y0, radius):
    return lambda x, y: np.hypot(x - x0, y - y0) - radius


def largest(*limits):
    return lambda x, y: np.max([limit(x, y) for limit in limits], axis=0)


def across(x, y):
    """Distance from a slanting line."""
    return np.abs(x - 0.7 * y - 0.131) / np.hypot(1.0, 0.7)


CENTRES = [(x, y) for x in (0.21, 0.5125, 0.83) for y in (0.19, 0.5125, 0.77)]
CASES = {  # limits, pieces, holes
    "disc": ([disc(0.5, 0.5, 0.3)], 1, 0),
    "large disc": ([disc(0.5, 0.5, 0.45)], 1, 0),
    "disc, squared": ([lambda x, y: 0.09 - (x - 0.5) ** 2 - (y - 0.5) ** 2], 1, 0),
    "four limits": (
        [
            lambda x, y: x - 0.11 - 0.1 * y,
            lambda x, y: 0.87 - x + 0.05 * np.sin(6.0 * y),
            lambda x, y: y - 0.213,
            lambda x, y: 0.9 - y - 0.3 * x**2,
        ],
        1,
        0,
    ),
    "island of 5.1 %": ([disc(0.5125, 0.5125, 0.0255)], 1, 0),
    "islands": ([largest(*(disc(x, y, 0.0255) for x, y in CENTRES))], 9, 0),
    "holes": ([outside(x, y, 0.0255) for x, y in CENTRES], 1, 9),
    "hole and island in it": ([largest(outside(0.5, 0.5, 0.2), disc(0.5, 0.5, 0.1))], 2, 1),
    "sliver between two limits": ([lambda x, y: x - y + 0.004, lambda x, y: y - x + 0.01], 1, 0),
    "sliver with a ridge": ([lambda x, y: 0.006 - across(x, y)], 1, 0),
    "sliver with a round back": ([lambda x, y: 0.006**2 - across(x, y) ** 2], 1, 0),
    "sliver along a border": ([lambda x, y: 0.004 - np.abs(x - 0.0125)], 1, 0),
    "sliver along the other border": ([lambda x, y: 0.004 - np.abs(y - 0.9875)], 1, 0),
    "unsafe sliver": ([lambda x, y: across(x, y) - 0.006], 2, 0),
    "round unsafe sliver": ([lambda x, y: across(x, y) ** 2 - 0.006**2], 2, 0),
    "flat island between the lines": ([lambda x, y: 1.0 - ((x - 0.51) / 0.03) ** 2 - ((y - 0.5125) / 0.006) ** 2], 1, 0),
    "flat hole between the lines": ([lambda x, y: ((x - 0.51) / 0.03) ** 2 + ((y - 0.5125) / 0.006) ** 2 - 1.0], 1, 1),
    "at the corner": ([disc(0.0, 0.0, 0.7), lambda x, y: x - 0.1], 1, 0),
    "across two borders": ([lambda x, y: 0.2 - np.abs(x - 0.4)], 1, 0),
    "cut by a border": ([disc(0.29, 0.5, 0.3)], 1, 0),
    "two pieces that nearly touch": ([lambda x, y: (x - 0.5012) * (y - 0.4963) - 2e-5], 2, 0),
    "no value beyond a line": ([lambda x, y: np.where(x > 0.613, np.nan, disc(0.5, 0.5, 0.3)(x, y))], 1, 0),
    "no value outside a disc": ([lambda x, y: np.where(disc(0.5, 0.5, 0.3)(x, y) >= 0.0, 1.0, np.nan)], 1, 0),
    "no value in a hole": ([lambda x, y: np.where(disc(0.4, 0.5, 0.1)(x, y) >= 0.0, np.nan, 1.0), lambda x, y: 0.9 - x], 1, 1),
    "jump": ([lambda x, y: np.where(disc(0.5, 0.5, 0.3)(x, y) >= 0.0, 1.0, -0.2)], 1, 0),
    "jump from far above": ([lambda x, y: np.where(y < 0.3 + 0.4 * x, 1000.0, -1.0)], 1, 0),
    "jump to infinity": ([lambda x, y: np.where(y < 0.3 + 0.4 * x, np.inf, -1.0)], 1, 0),
    "runaway": ([lambda x, y: 5.0 - 100.0 * (1.0 + np.tanh((x - 0.4 - 0.2 * y**2) / 0.002)), lambda x, y: y - 0.1], 1, 0),
    "five decades": ([lambda x, y: 1e6 * np.exp(-14.0 * x + 3.0 * y) - 1000.0], 1, 0),
    "least of largest": ([lambda x, y: np.minimum(np.maximum(x - 0.3, y - 0.6), np.maximum(0.8 - x, 0.33 - y))], 1, 0),
    "ring": ([lambda x, y: 0.1 - np.abs(np.hypot(x - 0.5, y - 0.5) - 0.3)], 1, 1),
}


def shares(found: Trace, margins, points=DENSE):
    """Return which share of the area called safe is not, and which share of the square is safe but not called so."""
    said, true = found.holds(points), holding(margins(points))
    return np.sum(said & ~true) / max(said.sum(), 1), np.mean(true & ~said)


@pytest.mark.parametrize("name", CASES)
def test_case(name):
    limits, pieces, holes = CASES[name]
    margins = Counted(*limits)
    found = trace(margins)
    assert (pieces, holes) == (found.pieces, found.holes)
    unsafe, missed = shares(found, margins)
    assert 0.005 > unsafe
    assert 2e-3 > missed
    assert holding(margins(DENSE)).mean() == pytest.approx(found.safe_share, abs=2e-3)


@pytest.mark.parametrize("name", CASES)
def test_work(name):
    margins = Counted(*CASES[name][0])
    found = trace(margins)
    asked = np.concatenate(margins.asked)
    assert 4040 == AFFORDED
    assert len(asked) == found.marches
    assert 4040 >= found.marches
    assert len(np.unique(asked, axis=0)) == found.marches  # nothing is marched twice
    assert len(margins.asked) == found.calls
    assert 15 >= found.calls
    assert 0.0 <= asked.min()
    assert 1.0 >= asked.max()


@pytest.mark.parametrize("name", CASES)
def test_lines(name):
    margins = Counted(*CASES[name][0])
    found = trace(margins)
    assert found.lines
    for line in found.lines:
        ends = line.points[[0, -1]]
        assert line.closed == bool(np.all(ends[0] == ends[1]))
        assert line.closed or np.all(np.any((ends == 0.0) | (ends == 1.0), axis=1))
        assert 0.005 * np.sqrt(2.0) + 1e-12 >= np.hypot(*np.diff(line.points, axis=0).T).max()
        assert line.points.shape == (len(line.limits), 2)
        assert np.isfinite(line.points).all()


@pytest.mark.parametrize("name", CASES)
def test_share_is_the_area_within_the_lines(name):
    found = trace(Counted(*CASES[name][0]))
    assert found.holds(DENSE).mean() == pytest.approx(found.safe_share, abs=1e-3)


def test_safe_side_lies_to_the_left():
    found = trace(Counted(*CASES["ring"][0]))
    outer, inner = sorted(found.lines, key=lambda line: -len(line.points))
    for line, area in ((outer, np.pi * 0.4**2), (inner, -np.pi * 0.2**2)):
        x, y = line.points.T
        assert area == pytest.approx(0.5 * np.sum(x[:-1] * y[1:] - x[1:] * y[:-1]), rel=1e-3)


def test_smooth_boundary_lies_where_it_is():
    found = trace(Counted(disc(0.5, 0.5, 0.3)))
    (line,) = found.lines
    assert np.hypot(*(line.points - 0.5).T) == pytest.approx(0.3, abs=2e-5)
    assert np.pi * 0.09 == pytest.approx(found.safe_share, rel=2e-4)


@pytest.mark.parametrize("name", ["jump", "no value outside a disc"])
def test_jump_is_drawn_on_the_safe_side_within_the_resolution(name):
    (line,) = trace(Counted(*CASES[name][0])).lines
    distance = np.hypot(*(line.points - 0.5).T)
    assert 0.3 + 1e-8 >= distance.max()
    assert 0.3 - 0.005 <= distance.min()


def test_no_line_is_drawn_where_brackets_are_too_dear_to_narrow():
    """Seven wide jumps cost more than a tenth of the lattice: they are bracketed all the same, and drawn on the safe side."""
    margins = Counted(lambda x, y: np.where(np.sin(43.0 * x) >= 0.0, 1.0, np.nan))
    found = trace(margins)
    assert 7 == found.pieces
    assert 0.0 == shares(found, margins)[0]
    for line in found.lines:
        root = np.rint(line.points[:, 0] * 43.0 / np.pi) * np.pi / 43.0
        assert 0.005 + 1e-12 >= np.abs(line.points[:, 0] - root).max()


def test_each_boundary_point_names_its_limit():
    margins = Counted(*CASES["four limits"][0])
    (line,) = trace(margins).lines
    values = margins(line.points)
    assert 1e-4 > np.abs(values[np.arange(len(values)), line.limits]).max()
    assert {0, 1, 2, 3} == set(line.limits.tolist())
    assert -1e-4 < values.min()


def test_binding_shares_are_of_the_length():
    found = trace(Counted(lambda x, y: 0.75 - x, lambda x, y: 0.25 - y, lambda x, y: 1.0 + x))
    assert {0: 0.25, 1: 0.75} == pytest.approx(found.binding_shares(), abs=5e-3)
    assert [1, 0] == list(found.binding_shares())


def test_stretch_between_two_limits_counts_half_for_either():
    found = trace(Counted(lambda x, y: 0.5 - x))
    line = Line(np.array([[0.0, 0.0], [1.0, 0.0], [1.0, 3.0]]), np.array([0, 1, 1]), False)
    assert {1: 3.5 / 4.0, 0: 0.5 / 4.0} == pytest.approx(dataclasses.replace(found, lines=(line,)).binding_shares())


def test_point_without_any_value_is_counted_to_the_last_limit():
    def failed(x, y):
        return np.where(x > 0.5013, np.nan, 1.0 - y - 0.3)

    found = trace(Counted(failed, lambda x, y: np.where(x > 0.5013, np.nan, 1.0)))
    (line,) = found.lines
    assert {1} == set(line.limits[line.points[:, 1] < 0.69].tolist())
    assert {0} == set(line.limits[line.points[:, 0] < 0.49].tolist())


@pytest.mark.parametrize(("value", "share", "pieces"), [(1.0, 1.0, 1), (0.0, 1.0, 1), (-1.0, 0.0, 0), (np.nan, 0.0, 0)])
def test_everything_or_nothing(value, share, pieces):
    margins = Counted(lambda x, y: np.full(len(x), value))
    found = trace(margins)
    assert (share, pieces, 0, ()) == (found.safe_share, found.pieces, found.holes, found.lines)
    assert {} == found.binding_shares()
    assert (1681, 1) == (found.marches, found.calls)
    assert share == found.holds(DENSE).mean()


def test_saddle_is_joined_where_its_centre_holds():
    """Two pieces that touch in one lattice cell are one or two as the cell's centre says."""
    for lift, pieces in ((1e-6, 1), (-1e-6, 2)):
        assert pieces == trace(Counted(lambda x, y, lift=lift: (x - 0.5025) * (y - 0.4975) + lift)).pieces


def test_the_coarse_grid_is_handed_on():
    found = trace(Counted(lambda x, y: x - 0.5 + 0.1 * y, lambda x, y: 2.0 * y))
    assert (1681, 2) == found.points.shape
    assert [0.0, 0.025] == found.points[1].tolist()
    assert found.points[:, 0] - 0.5 + 0.1 * found.points[:, 1] == pytest.approx(found.margins[:, 0], abs=0.0)


within = st.floats(0.0, 1.0)


@settings(max_examples=40, deadline=None)
@given(st.floats(0.06, 0.94), st.floats(0.06, 0.94), st.floats(0.026, 0.3), st.floats(0.026, 0.3), st.floats(0.0, np.pi), st.sampled_from([1, -1]))
def test_ellipse(x0, y0, a, b, angle, sign):
    """A whole ellipse, safe or unsafe, whose axes are above 5 %, is never missed; its area is pi a b where it lies within the square."""

    def margin(x, y):
        along, across = (x - x0) * np.cos(angle) + (y - y0) * np.sin(angle), (y - y0) * np.cos(angle) - (x - x0) * np.sin(angle)
        return sign * (1.0 - (along / a) ** 2 - (across / b) ** 2)

    margins = Counted(margin)
    found = trace(margins)
    unsafe, missed = shares(found, margins)
    assert 0.005 > unsafe
    assert 0.005 > missed
    assert 4040 >= found.marches
    assert 1 <= found.pieces
    inner = min(x0, y0, 1.0 - x0, 1.0 - y0) > max(a, b) + 0.005
    if inner:
        assert (1, int(sign < 0)) == (found.pieces, found.holes)
        area = np.pi * a * b
        assert (area if sign > 0 else 1.0 - area) == pytest.approx(found.safe_share, abs=0.01 * area)


@settings(max_examples=30, deadline=None)
@given(st.floats(0.0, np.pi), st.floats(0.3, 0.7), st.floats(0.3, 0.7), st.floats(0.006, 0.2), st.sampled_from([1, -1]))
def test_band(angle, x0, y0, half, sign):
    """A band of more than two lattice steps is traced whole, whatever its slant."""
    margins = Counted(lambda x, y: sign * (half - np.abs((x - x0) * np.sin(angle) - (y - y0) * np.cos(angle))))
    found = trace(margins)
    unsafe, missed = shares(found, margins)
    assert 0.005 > unsafe
    assert 0.005 > missed
    assert 4040 >= found.marches
    assert 0 == found.holes
    if sign > 0:
        assert 1 == found.pieces


@settings(max_examples=30, deadline=None)
@given(within, within, st.floats(0.026, 0.35), st.sampled_from([-1.0, np.nan, -1e9]), st.sampled_from([1e-3, 1.0, 1e9]), st.booleans())
def test_disc_with_a_jump(x0, y0, radius, below, above, hole):
    """Without any slope to go by, nothing larger than 5 % is missed and nothing unsafe called safe."""
    margins = Counted(lambda x, y: np.where((np.hypot(x - x0, y - y0) <= radius) != hole, above, below))
    found = trace(margins)
    unsafe, missed = shares(found, margins)
    assert 0.005 > unsafe
    assert 0.008 > missed
    assert 4040 >= found.marches


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 4), st.sampled_from([2.0, 5.0]))
def test_smooth_fields(seed, limits, waves):
    """Sums of eight waves a limit: pieces, holes and corners in any arrangement."""
    draw = np.random.default_rng(seed)
    wave, phase, height = draw.normal(size=(limits, 8, 2)) * waves, draw.uniform(0.0, 6.3, (limits, 8)), draw.normal(size=(limits, 8))
    level = 2.0 * draw.normal(size=limits)

    def margins(points):
        return level + np.sum(height * np.sin(np.einsum("md,lwd->mlw", points, wave) + phase), axis=-1)

    found = trace(margins)
    some = DENSE[::7]
    said, true = found.holds(some), holding(margins(some))
    assert 0.005 * said.sum() + 3 > np.sum(said & ~true)  # a region of a few dense points has no share to speak of
    assert 0.005 > np.mean(true & ~said)
    assert 4040 >= found.marches
