"""The compiled right-hand side, Jacobian and LU against their naive twins, over random and awkward states, lane by lane."""

import numpy as np
import pytest

from sweep.kernel import layout as at
from sweep.kernel import sparse
from sweep.kernel.layout import LANES
from tests import naive
from tests.kernel import cases, probe

KINDS = ("jacket", "duty", "held", "adiabatic")
STATES = ("mixed", "empty", "negative", "tiny", "hot")
DELTA = 1e-6


def _filled(name: str, kind: str, state: str, seed: int) -> tuple[probe.Probe, list[naive.Batch], np.ndarray, np.ndarray]:
    """Return a probe whose lanes hold different blocks, states and times."""
    program, rng = cases.program_of(name), np.random.default_rng(seed)
    blocks = [cases.block_of(program, rng, kind) for _ in range(LANES)]
    y = np.stack([cases.state_of(program, block, rng, state) for block in blocks], axis=1)
    times = rng.uniform(100.0, 4000.0, LANES)
    door = probe.Probe(program)
    door.array(at.W_BLOCK, program.block)[:] = np.stack(blocks, axis=1)
    door.array(at.W_Y, y.shape[0])[:] = y
    door.lane(at.L_TIME)[:], door.lane(at.L_DELTA)[:] = times, DELTA
    return door, [naive.Batch(program, block, DELTA) for block in blocks], y, times


def _cases() -> list[tuple[str, str]]:
    """Return structures with each kind of cooling that they can have."""
    return [(name, kind) for name, s in cases.STRUCTURES.items() for kind in KINDS if kind != "duty" or s.has_duty]


@pytest.mark.parametrize("state", STATES)
@pytest.mark.parametrize(("name", "kind"), _cases())
def test_right_side(name, kind, state):
    door, batches, y, times = _filled(name, kind, state, 11)
    door.run(probe.BALANCES)
    rows = y.shape[0]
    for lane, batch in enumerate(batches):
        expected = naive.dydt(batch, y[:, lane], times[lane])
        scale = np.abs(expected) + 1e-6 * np.abs(expected[:-4]).max(initial=0.0) + 1e-12
        for array in (at.W_F, at.W_NEW):  # as it stands at a step's start, and as the stages evaluate it
            found = door.array(array, rows)[:, lane]
            assert np.zeros(rows) == pytest.approx((found - expected) / scale, abs=1e-8)


@pytest.mark.parametrize("name", list(cases.STRUCTURES))
def test_heat_release_and_duty(name):
    for kind in [k for n, k in _cases() if n == name]:
        door, batches, y, times = _filled(name, kind, "mixed", 12)
        door.run(probe.BALANCES)
        nz = y.shape[0] - 4
        for lane, batch in enumerate(batches):
            t, state = times[lane], y[:, lane]
            n, V = naive.moles(batch, state, t), naive.volume(batch, t)
            r = naive.reaction_rates(batch, n / V, state[nz])
            expected = naive.energy_flows(batch, n, r, V, state[nz], state[nz + 1])
            assert expected["heat"] == pytest.approx(door.lane(at.L_HEAT)[lane], rel=1e-9)
            assert expected["duty"] == pytest.approx(door.lane(at.L_DUTY)[lane], rel=1e-9, abs=1e-11 * abs(expected["gained"]))
            assert expected["slope"] == pytest.approx(door.lane(at.L_RATE)[lane], rel=1e-8, abs=1e-14)


def _steps(y: np.ndarray) -> np.ndarray:
    """Return steps for differences, small against every width in the equations."""
    nz = y.size - 4
    return np.array([1e-4] * nz + [1e-4, 1e-3, 1e-1, 1.0])


@pytest.mark.parametrize("state", ["mixed", "negative", "hot"])
@pytest.mark.parametrize(("name", "kind"), _cases())
def test_jacobian_and_time_derivative(name, kind, state):
    """Central differences of the naive right-hand side; each entry against the size that its row and column give it."""
    door, batches, y, times = _filled(name, kind, state, 13)
    door.run(probe.BALANCES)
    found, by_time = door.matrix(), door.array(at.W_SLOPE, y.shape[0])
    for lane in range(0, LANES, 3):
        batch, t = batches[lane], times[lane]
        expected = naive.jacobian(batch, y[:, lane], t, _steps(y[:, lane]))
        noise = 1e-14 * np.abs(naive.dydt(batch, y[:, lane], t))[:, None] / _steps(y[:, lane])
        allowed = 1e-5 * np.abs(expected) + 3e-6 * np.abs(expected).max(axis=1, keepdims=True) + 20.0 * noise + 1e-13
        assert np.all(np.abs(found[lane] - expected) <= allowed)
        in_time = naive.central(lambda x, b=batch, i=lane: naive.dydt(b, y[:, i], x), t, 0.5)
        size = np.abs(naive.dydt(batch, y[:, lane], t))
        assert np.all(np.abs(by_time[:, lane] - in_time) <= 1e-6 * np.abs(in_time) + 1e-12 * size + 1e-13)


def _near_the_valve_ends(name: str) -> tuple[probe.Probe, list[naive.Batch], np.ndarray, np.ndarray]:
    """Return lanes whose controller stands inside the bands beyond 0 and 1, and well beyond them."""
    door, batches, y, times = _filled(name, "jacket", "mixed", 14)
    nz = y.shape[0] - 4
    wanted = np.resize([-0.5e-3, -0.2e-3, 1.0 + 0.3e-3, 1.0 + 0.8e-3, -0.02, 1.02, 0.4], LANES)
    for lane, batch in enumerate(batches):
        b = batch.block
        y[nz + 2, lane] = (wanted[lane] / b[at.GAIN] - (y[nz, lane] - b[at.SET_POINT])) / b[at.RESET_INVERSE]
    door.array(at.W_Y, y.shape[0])[:] = y
    return door, batches, y, times


def test_controller_at_the_ends_of_the_valve():
    door, batches, y, times = _near_the_valve_ends("extents")
    door.run(probe.BALANCES)
    found, nz = door.matrix(), y.shape[0] - 4
    steps = np.array([1e-4] * nz + [1e-5, 1e-3, 1e-2, 1.0])
    for lane, batch in enumerate(batches):
        right = naive.dydt(batch, y[:, lane], times[lane])
        assert right == pytest.approx(door.array(at.W_F, y.shape[0])[:, lane], rel=1e-7, abs=1e-9)
        expected = naive.jacobian(batch, y[:, lane], times[lane], steps)
        assert expected[nz + 1] == pytest.approx(found[lane, nz + 1], rel=1e-5, abs=1e-8)
        assert expected[nz + 2] == pytest.approx(found[lane, nz + 2], rel=1e-5, abs=1e-6)


@pytest.mark.parametrize("name", list(cases.STRUCTURES))
def test_factors_and_solution(name):
    """(I/(h gamma) - J) x = right, for steps from a moment to a week, to the rounding that elimination without pivoting may have.

    |A x - b| <= 3 n eps |L| |U| |x|, Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., theorem 9.4 (from memory).
    """
    door, _, y, _ = _filled(name, "jacket", "mixed", 15)
    door.run(probe.BALANCES)
    J, rng, n = door.matrix(), np.random.default_rng(16), y.shape[0]
    diagonal = np.geomspace(1e-5, 1e4, LANES)
    right = rng.normal(size=(n, LANES))
    door.lane(at.L_STEP)[:] = diagonal
    door.array(at.W_K, n)[:] = -right
    door.run(probe.SOLVE)
    order = sparse.elimination_order((J != 0.0).any(axis=0))
    for lane in range(LANES):
        x = door.array(at.W_K, n)[:, lane]
        factors = door.matrix()[lane][np.ix_(order, order)]
        L, U = np.tril(factors, -1) + np.eye(n), np.triu(factors, 1) + np.diag(1.0 / np.diag(factors))
        left = (diagonal[lane] * np.eye(n) - J[lane]) @ x
        allowed = 3 * n * np.finfo(float).eps * (np.abs(L) @ np.abs(U) @ np.abs(x[order]))
        assert np.all(np.abs(left - right[:, lane])[order] <= 2.0 * allowed)


def test_exponential_and_logarithm_over_their_range():
    """Relative error below 1e-14 (exp) and 1e-15 of the larger of 1 and the value (log), the edges and NaN included."""
    door, rng = probe.Probe(cases.program_of("extents")), np.random.default_rng(17)
    for _ in range(200):
        x = np.concatenate([rng.uniform(-700.0, 700.0, LANES // 2), rng.uniform(-1.0, 1.0, LANES // 2)])
        door.lane(0)[:] = x
        door.run(probe.FUNCTIONS)
        assert np.exp(x) == pytest.approx(door.lane(1), rel=1e-14)
        x = np.concatenate([np.exp(rng.uniform(-700.0, 700.0, LANES // 2)), rng.uniform(0.5, 2.0, LANES // 2)])
        door.lane(0)[:] = x
        door.run(probe.FUNCTIONS)
        assert np.log(x) == pytest.approx(door.lane(2), rel=1e-15, abs=1e-15)
    door.lane(0)[:4] = [-1e4, 1e4, np.nan, 0.0]
    door.run(probe.FUNCTIONS)
    assert np.exp(-700.0) == pytest.approx(door.lane(1)[0], rel=1e-13)
    assert np.exp(700.0) == pytest.approx(door.lane(1)[1], rel=1e-13)
    assert np.isnan(door.lane(1)[2])
    assert 1.0 == door.lane(1)[3]
