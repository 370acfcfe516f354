"""Conditions that break a march off: on the dense output, up and back inside one step too; and nothing else of a march changes."""

from dataclasses import replace

import numpy as np
import pytest

from sweep.kernel import layout as at
from sweep.kernel.engine import march
from sweep.kernel.program import Program, Watch, compile_tables
from tests import naive
from tests.kernel import cases
from tests.kernel.test_march import END, _points

HOT, HEAT, THIN, DUTY = range(4)
OFF = np.array([np.inf, np.inf, -np.inf, np.inf])


def _watching(name: str) -> Program:
    """Return a program that watches for T above, heat release above, the concentration of species 0 below, cooling duty above."""
    structure = cases.STRUCTURES[name]
    nz = structure.sources.shape[0]
    none = (0.0,) * (nz + 2)
    thin = Watch(0, -1.0, (*structure.amounts[0].tolist(), 0.0, 0.0), species=0, per_volume=True)
    return compile_tables(replace(structure, watches=(Watch(0, 1.0, (*none[:nz], 1.0, 0.0)), Watch(1, 1.0, none), thin, Watch(2, 1.0, none))))


@pytest.mark.parametrize("name", ["extents", "amounts", "ideal cooling"])
def test_watches_that_are_not_armed_change_no_bit(name):
    plain, watching = cases.program_of(name), _watching(name)
    points = _points(plain, 24)
    expected = march(plain, *points)
    found = march(watching, *points, levels=np.tile(OFF, (24, 1)))
    for part in ("out", "at_end", "at_target", "at_best", "at_last"):
        np.testing.assert_array_equal(getattr(expected, part), getattr(found, part))
    assert {-1.0} == set(found.out[:, at.OUT_EVENT])


def _broken_off(watching: Program, points: tuple, which: int, level: np.ndarray):
    levels = np.tile(OFF, (level.size, 1))
    levels[:, which] = level
    return march(watching, *points, levels=levels)


@pytest.mark.parametrize("below", [1e-9, 1e-3, 0.3])
def test_a_peak_inside_one_step_is_not_missed(below):
    """A level just under the highest temperature, which lies inside a step in most points: up and back within that step."""
    plain, watching = cases.program_of("extents"), _watching("extents")
    points = _points(plain, 160)
    whole = march(plain, *points)
    top, when = whole.out[:, at.OUT_T_MAX], whole.out[:, at.OUT_T_MAX_TIME]
    inner = (when > 1.0) & (when < END - 1.0) & (points[1][:, 3] < top - below)
    assert inner.sum() > 8
    found = _broken_off(watching, points, HOT, top - below)
    assert {float(HOT)} == set(found.out[inner, at.OUT_EVENT])
    assert (found.out[inner, at.OUT_TIME] <= when[inner]).all()
    assert (top - below)[inner] == pytest.approx(found.at_last[inner, 3], abs=1e-10)
    over = _broken_off(watching, points, HOT, top + 1e-9)
    assert {-1.0} == set(over.out[:, at.OUT_EVENT])


def test_the_state_is_that_of_the_dense_output():
    plain, watching = cases.program_of("extents"), _watching("extents")
    points = _points(plain, 32)
    top, start = march(plain, *points).out[:, at.OUT_T_MAX], points[1][:, 3]
    found = _broken_off(watching, points, HOT, 0.5 * (top + start))
    times = found.out[:, at.OUT_TIME][:, None]
    expected = march(plain, *points, times).samples[:, 0]
    assert expected == pytest.approx(found.at_last, rel=1e-11, abs=1e-9)


def _naive_batch(program: Program, points: tuple, n: int, time: float) -> naive.Batch:
    return naive.Batch(program, points[0][n, int(time > 0.5 * END)], float(points[2][n, at.DELTA]))


@pytest.mark.parametrize("name", ["extents", "amounts"])
def test_concentration_and_heat_flows_against_the_naive_twin(name):
    plain, watching = cases.program_of(name), _watching(name)
    nz, points = plain.structure.sources.shape[0], _points(plain, 48)
    whole = march(plain, *points)
    tried = {HEAT: 0.9 * whole.out[:, at.OUT_HEAT_MAX], DUTY: 0.9 * whole.out[:, at.OUT_DUTY_MAX]}
    first = [naive.moles(_naive_batch(plain, points, n, 0.0), points[1][n], 0.0)[0] / points[0][n, 0, at.VOLUME] for n in range(48)]
    tried[THIN] = 0.7 * np.array(first)
    for which, level in tried.items():
        found = _broken_off(watching, points, which, level)
        hit = np.flatnonzero((found.out[:, at.OUT_EVENT] == which) & (found.out[:, at.OUT_TIME] > 0.0))
        assert hit.size > 3
        for n in hit:
            time, y = float(found.out[n, at.OUT_TIME]), found.at_last[n]
            batch = _naive_batch(plain, points, int(n), time)
            moles, volume = naive.moles(batch, y, time), naive.volume(batch, time)
            flows = naive.energy_flows(batch, moles, naive.reaction_rates(batch, moles / volume, y[nz]), volume, y[nz], y[nz + 1])
            value = {HEAT: flows["heat"], DUTY: flows["duty"], THIN: moles[0] / volume}[which]
            assert level[n] == pytest.approx(value, rel=1e-8)


def test_a_condition_that_holds_at_the_start_is_met_there():
    watching = _watching("extents")
    points = _points(watching, 20)
    found = _broken_off(watching, points, HOT, points[1][:, 3])
    assert np.zeros(20) == pytest.approx(found.out[:, at.OUT_TIME], abs=0.0)
    assert points[1] == pytest.approx(found.at_last)


def test_levels_that_do_not_fit_are_refused():
    watching = _watching("extents")
    with pytest.raises(ValueError, match="4 watches"):
        march(watching, *_points(watching, 2), levels=np.zeros((2, 3)))
    with pytest.raises(ValueError, match="4 watches"):
        march(watching, *_points(watching, 2))
