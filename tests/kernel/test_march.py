"""The march through its door: order, events against a fine sampling, bounds on work, failures that stay with their point."""

import numpy as np
import pytest

from sweep.base.status import DONE, RUNAWAY, STEP_TOO_SMALL, TOO_MANY_STEPS
from sweep.kernel import layout as at
from sweep.kernel.engine import Marched, march
from sweep.kernel.layout import LANES
from sweep.kernel.program import Program
from tests.kernel import cases

END = 4000.0


def _points(program: Program, count: int, segments: int = 2, kind: str = "jacket", seed: int = 21) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return blocks, starts and constants of random points: feeds in the first half, none in the second; mild kinetics."""
    rng, head = np.random.default_rng(seed), program.integers
    nz = program.structure.sources.shape[0]
    blocks, starts, constants = np.zeros((count, segments, program.block)), np.zeros((count, nz + 4)), np.zeros((count, at.N_CONSTANTS))
    feed, base = slice(head[at.BLOCK_FEED], head[at.BLOCK_BASE]), slice(head[at.BLOCK_BASE], head[at.BLOCK_RATE])
    for n in range(count):
        block = cases.block_of(program, rng, kind)
        block[[at.T_START, at.T_END]] = 0.0, END
        block[head[at.BLOCK_RATE] : head[at.BLOCK_HEAT] : program.structure.rate_terms] += _milder(program)
        block[head[at.BLOCK_HEAT] : head[at.BLOCK_CP] : program.structure.heat_terms] *= 0.15
        block[base][2:] = 0.0
        starts[n, nz : nz + 2] = block[at.SET_POINT], block[at.SET_POINT] - 5.0
        if nz == 5:
            starts[n, :5] = rng.uniform(100.0, 4000.0, 5) * [1.0, 1.0, 0.0, 0.0, 0.0]
        moles = block[base].sum() + starts[n, :nz].sum() * (nz == 5)
        constants[n] = [END, 0.0, 0.2 * (block[base][0] + starts[n, 0]), 3600.0, 1e-3 * moles, 1500.0, 1e-9 * moles, END]
        for k in range(segments):
            blocks[n, k] = _later(program, block, END * k / segments, 0.5 * END, feed, base)
            blocks[n, k, at.T_END] = END * (k + 1) / segments
    return blocks, starts, constants


def _milder(program: Program) -> np.ndarray:
    """Return what to add to each ln k so that a reaction of any order takes minutes to hours at 1,000 mol/m3."""
    orders = [sum(f.power + f.extra for f in term.factors) for terms in program.structure.reactions for term in terms]
    return 4.0 - np.log(1000.0) * (np.array(orders) - 1.0)


def _later(program: Program, block: np.ndarray, start: float, stop: float, feed: slice, base: slice) -> np.ndarray:
    """Return the same block from a time on, its feeds ended at `stop`."""
    moved, fed = block.copy(), min(start, stop)
    moved[at.T_START] = start
    moved[at.VOLUME] += block[at.VOLUME_RATE] * fed
    moved[base] += block[feed] * fed
    if start >= stop:
        moved[feed] = moved[at.VOLUME_RATE] = moved[at.FEED_HEAT] = 0.0
        moved[at.FEED_CP : at.FEED_CP + 4] = 0.0
    return moved


def test_order_by_the_slope_of_the_error():
    """Without step control the steps of a segment follow one pattern, so halving the segments halves every step."""
    program = cases.program_of("extents")
    errors, counts = [], [4, 8, 16, 32]
    exact = march(program, *_points(program, 8, 64, "adiabatic"), tolerance=1e-11).at_end
    for segments in counts:
        found = march(program, *_points(program, 8, segments, "adiabatic"), tolerance=1e9)
        assert 0 == found.out[:, at.OUT_REJECTED].max()
        errors.append(np.median(np.abs(found.at_end[:, 3] - exact[:, 3])))
    slope = -float(np.polyfit(np.log(counts), np.log(errors), 1)[0])
    assert 5.0 == pytest.approx(slope, abs=0.2)


@pytest.mark.parametrize("name", list(cases.STRUCTURES))
def test_tolerance_is_kept(name):
    """At the default tolerance every state is within 1e-4 of one far tighter."""
    program = cases.program_of(name)
    points = _points(program, 40)
    times = np.tile(np.linspace(0.0, END, 9), (40, 1))
    rough, fine = march(program, *points, times), march(program, *points, times, tolerance=1e-10)
    assert np.full(40, DONE) == pytest.approx(rough.out[:, at.OUT_STATUS])
    scale = np.abs(fine.samples).max(axis=(0, 1))
    scale[-4:-2] = 100.0
    assert np.zeros(fine.samples.shape) == pytest.approx((rough.samples - fine.samples) / scale, abs=1e-4)


def _sampled(program: Program, points: tuple, count: int = 8001) -> tuple[Marched, np.ndarray, np.ndarray]:
    times = np.tile(np.linspace(0.0, END, count), (points[0].shape[0], 1))
    found = march(program, *points, times, tolerance=1e-9)
    return found, times[0], found.samples


def test_highest_temperature_target_and_most_productive_time_against_a_fine_sampling():
    program = cases.program_of("extents")
    points = _points(program, 24)
    found, times, states = _sampled(program, points)
    out, structure = found.out, program.structure
    assert states[:, :, 3].max(axis=1) == pytest.approx(out[:, at.OUT_T_MAX], abs=2e-4)
    reacted, target = states[:, :, :3] @ structure.target, points[2][:, at.TARGET_AMOUNT]
    assert reacted.max(axis=1) == pytest.approx(out[:, at.OUT_REACTED_MAX], rel=1e-6)
    made = states[:, :, :3] @ structure.product / (times + 3600.0)
    assert made.max(axis=1) == pytest.approx(out[:, at.OUT_BEST], rel=1e-6)
    assert np.sum(made.argmax(axis=1) < 7000) > 3  # some of the most productive times lie inside the march
    assert np.einsum("nk,k->n", found.at_best[:, :3], structure.product) / (out[:, at.OUT_BEST_TIME] + 3600.0) == pytest.approx(
        out[:, at.OUT_BEST], rel=1e-12
    )
    reached = reacted.max(axis=1) >= target
    assert 5 < reached.sum()
    for n in np.flatnonzero(reached):
        k = int(np.argmax(reacted[n] >= target[n]))
        expected = np.interp(target[n], reacted[n, k - 1 : k + 1], times[k - 1 : k + 1])
        assert expected == pytest.approx(out[n, at.OUT_CROSSED], abs=1e-3)
        assert target[n] == pytest.approx(found.at_target[n, :3] @ structure.target, rel=1e-9)
    assert np.isnan(out[~reached, at.OUT_CROSSED]).all()
    assert np.isnan(found.at_target[~reached]).all()


@pytest.mark.parametrize("kind", ["jacket", "adiabatic"])
def test_highest_heat_release_duty_and_rate_of_temperature_against_a_fine_sampling(kind):
    from tests import naive

    program = cases.program_of("extents")
    points = _points(program, 6, kind=kind)
    found, times, states = _sampled(program, points, 2001)
    for n in range(6):
        heat, duty, rate = [], [], []
        for t, y in zip(times, states[n], strict=True):
            batch = naive.Batch(program, points[0][n, int(t >= 0.5 * END)], float(points[2][n, at.DELTA]))
            moles, volume = naive.moles(batch, y, t), naive.volume(batch, t)
            flows = naive.energy_flows(batch, moles, naive.reaction_rates(batch, moles / volume, y[3]), volume, y[3], y[4])
            heat.append(flows["heat"])
            duty.append(flows["duty"])
            rate.append(flows["slope"])
        assert max(heat) == pytest.approx(found.out[n, at.OUT_HEAT_MAX], rel=1e-4)
        assert max(duty) == pytest.approx(found.out[n, at.OUT_DUTY_MAX], rel=1e-4, abs=1e-6)
        assert max(rate) == pytest.approx(found.out[n, at.OUT_RATE_MAX], rel=1e-4, abs=1e-9)


def test_batch_that_ends_at_its_target():
    """No fixed end: the batch ends where the target is reached, the march goes on to its last time."""
    program = cases.program_of("extents")
    blocks, starts, constants = _points(program, 24)
    constants[:, at.END_FIXED] = np.nan
    found = march(program, blocks, starts, constants, tolerance=1e-9)
    reached = ~np.isnan(found.out[:, at.OUT_CROSSED])
    assert 5 < reached.sum()
    assert found.out[reached, at.OUT_CROSSED] == pytest.approx(found.out[reached, at.OUT_END_TIME], rel=1e-14)
    assert found.at_target[reached] == pytest.approx(found.at_end[reached], rel=1e-12)
    assert np.full((~reached).sum(), END) == pytest.approx(found.out[~reached, at.OUT_END_TIME])
    assert np.all(found.out[reached, at.OUT_T_MAX] >= found.at_end[reached, 3])


def test_samples_at_both_ends_and_fewer_than_asked():
    program = cases.program_of("extents")
    blocks, starts, constants = _points(program, 3)
    times = np.array([[0.0, 10.0, END], [END, np.nan, np.nan], [0.5 * END, 0.5 * END, 2.0 * END]])
    found = march(program, blocks, starts, constants, times)
    assert starts[0] == pytest.approx(found.samples[0, 0])
    assert found.at_end[0] == pytest.approx(found.samples[0, 2])
    assert found.at_end[1] == pytest.approx(found.samples[1, 0])
    assert found.samples[2, 0] == pytest.approx(found.samples[2, 1])
    assert np.isnan(found.samples[1, 1:]).all()
    assert np.isnan(found.samples[2, 2]).all()


def test_segments_without_length_are_passed_over():
    program = cases.program_of("extents")
    blocks, starts, constants = _points(program, 5)
    padded = np.concatenate([blocks[:, :1], blocks[:, :1], blocks, blocks[:, 1:]], axis=1)
    padded[:, 0, at.T_END] = 0.0
    padded[:, 1, at.T_END] = -5.0
    assert march(program, blocks, starts, constants).out.tobytes() == march(program, padded, starts, constants).out.tobytes()
    padded[:, :, at.T_END] = 0.0
    none = march(program, padded, starts, constants)
    assert np.zeros(5) == pytest.approx(none.out[:, at.OUT_STEPS])
    assert starts == pytest.approx(none.at_last)


def _explosive(program: Program, blocks: np.ndarray) -> None:
    """Let the first reaction run away: adiabatic, hot, far more heat than the contents can take."""
    head = program.integers
    blocks[:, [at.UA_CONSTANT, at.UA_PER_VOLUME]] = 0.0
    blocks[:, head[at.BLOCK_HEAT]] = -5e6
    blocks[:, head[at.BLOCK_RATE]] += 6.0


@pytest.mark.parametrize("name", list(cases.STRUCTURES))
def test_trouble_stays_with_its_point(name):
    """An explosion, a number that is none, an empty vessel: rows with their status, while the neighbours keep their bytes."""
    program = cases.program_of(name)
    count = 2 * LANES + 5
    blocks, starts, constants = _points(program, count)
    sound = march(program, blocks, starts, constants)
    assert np.zeros(count) == pytest.approx(sound.out[:, at.OUT_STATUS])
    explosive, nan, empty = 3, LANES + 1, LANES + 2
    _explosive(program, blocks[explosive])
    blocks[nan, 1, program.integers[at.BLOCK_RATE]] = np.nan
    blocks[empty, :, at.VOLUME] = 0.0
    blocks[empty, :, at.VOLUME_RATE] = 0.0
    mixed = march(program, blocks, starts, constants)
    others = np.setdiff1d(np.arange(count), [explosive, nan, empty])
    for field in ("out", "at_end", "at_target", "at_best", "at_last"):
        assert getattr(sound, field)[others].tobytes() == getattr(mixed, field)[others].tobytes()
    status = mixed.out[:, at.OUT_STATUS]
    assert RUNAWAY == status[explosive] or "ideal" in name
    assert {STEP_TOO_SMALL, TOO_MANY_STEPS} >= {status[nan], status[empty]}
    assert 0.5 * END == pytest.approx(mixed.out[nan, at.OUT_TIME])
    assert np.isfinite(mixed.at_last[[explosive, nan]]).all()


def test_runaway_stops_above_the_limit_and_keeps_what_came_before():
    program = cases.program_of("extents")
    blocks, starts, constants = _points(program, 4)
    for n in range(4):
        _explosive(program, blocks[n])
    found = march(program, blocks, starts, constants)
    assert np.full(4, RUNAWAY) == pytest.approx(found.out[:, at.OUT_STATUS])
    assert np.all(found.at_last[:, 3] > 1500.0)
    assert np.all(found.at_last[:, 3] < 6000.0)
    assert np.isnan(found.at_end).all()
    assert np.isnan(found.out[:, at.OUT_END_TIME]).all()


def test_steps_are_bounded_hard():
    program = cases.program_of("extents")
    points = _points(program, 20)
    found = march(program, *points, most_steps=9)
    assert np.full(20, TOO_MANY_STEPS) == pytest.approx(found.out[:, at.OUT_STATUS])
    assert np.full(20, 9.0) == pytest.approx(found.out[:, at.OUT_STEPS] + found.out[:, at.OUT_REJECTED])


def test_work_is_what_it_was():
    """A change detector on the steps of a fixed set of points, with a tenth of slack; the method needs them, noise does not."""
    program = cases.program_of("extents")
    found = march(program, *_points(program, 200))
    assert found.out[:, at.OUT_STEPS].mean() < 24.0
    assert found.out[:, at.OUT_REJECTED].mean() < 2.3


def test_order_of_points_and_number_of_points_do_not_matter():
    program = cases.program_of("reversible, fractional")
    blocks, starts, constants = _points(program, 41)
    whole = march(program, blocks, starts, constants).out
    turned = march(program, blocks[::-1], starts[::-1], constants[::-1]).out[::-1]
    assert whole.tobytes() == turned.tobytes()
    assert whole[7].tobytes() == march(program, blocks[7:8], starts[7:8], constants[7:8]).out[0].tobytes()


def test_nothing_to_march():
    program = cases.program_of("extents")
    blocks, starts, constants = _points(program, 2)
    assert (0, at.OUT_STATES) == march(program, blocks[:0], starts[:0], constants[:0]).out.shape


def test_shapes_that_do_not_fit_are_refused():
    program = cases.program_of("extents")
    blocks, starts, constants = _points(program, 2)
    with pytest.raises(ValueError, match="do not fit a program"):
        march(program, blocks[:, :, :-1], starts, constants)
    with pytest.raises(ValueError, match="do not fit a program"):
        march(program, blocks, starts[:1], constants)
    with pytest.raises(ValueError, match="sample times"):
        march(program, blocks, starts, constants, np.zeros((3, 4)))


def test_a_table_that_does_not_fit_its_scratch_memory_is_noticed():
    """Rows that reach past the end: the guard words tell, and nothing of the march is handed out."""
    program = cases.program_of("extents")
    points = _points(program, 2)
    program.integers[at.W_BEST] = program.integers[at.W_END] - 4  # seven rows from four before the end
    with pytest.raises(RuntimeError, match="outside its scratch memory"):
        march(program, *points)
