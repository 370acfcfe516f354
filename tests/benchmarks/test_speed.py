"""How fast beside SciPy's LSODA at equal error: a short form in the normal run, the whole on request (`-m benchmark`)."""

import numpy as np
import pytest

from tests.benchmarks import measure

NUMPY, NUMBA = 150.0, 40.0  # what the project must reach
WEAK = 0.2  # share of it that a busy machine may not fall below


@pytest.fixture(scope="module")
def equal() -> measure.Equal:
    """Return LSODA's tolerance at equal error, from a few points."""
    return measure.equalise(measure.draw(16))


def test_errors_are_equal_and_small(equal):
    """Both against the same reference, which the kernel at 1e-11 confirms; neither is given an easier task."""
    assert 1e-8 > equal.references_apart
    assert 0 == equal.failures
    assert 1e-5 > equal.ours.max()
    assert 1.0 == pytest.approx(np.median(equal.theirs) / np.median(equal.ours), abs=0.6)


def test_far_faster_even_on_a_busy_machine(equal):
    speeds = measure.time_all(measure.draw(1024), equal.rtol, rounds=3, few=2)
    assert 0 == speeds.failures
    assert WEAK * NUMPY < speeds.ratio("odeint, NumPy", "kernel")
    assert WEAK * NUMBA < speeds.ratio("odeint, numba", "kernel")


@pytest.mark.benchmark
def test_speed_at_equal_error(equal, capsys):
    """The march beside the fastest that SciPy has, which marches and no more; `evaluate`, from points to responses, is printed beside it."""
    speeds = measure.time_all(measure.draw(8192), equal.rtol, rounds=5, few=10)
    for way in ("kernel", "evaluate"):
        plain, compiled = speeds.ratio("odeint, NumPy", way), speeds.ratio("odeint, numba", way)
        rate = 1.0 / np.median(speeds.seconds[way])
        with capsys.disabled():
            print(f"\n{way}: {rate:,.0f} points/s, over LSODA (odeint) {plain:,.0f} x with NumPy, {compiled:,.0f} x with numba")
    assert 0 == speeds.failures
    assert NUMPY <= speeds.ratio("odeint, NumPy", "kernel")
    assert NUMBA <= speeds.ratio("odeint, numba", "kernel")
