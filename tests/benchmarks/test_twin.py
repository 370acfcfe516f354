"""The compiled kernel beside the same algorithm in C++ with explicit vectors: the same numbers, and nearly the same time (`-m benchmark`)."""

import time
from collections.abc import Callable

import numpy as np
import pytest

from sweep.kernel import layout as at
from sweep.kernel.engine import march
from tests.benchmarks import measure, twin

pytestmark = pytest.mark.skipif(twin.COMPILER is None, reason="no C++ compiler on this machine")


def test_both_leave_the_same():
    """Rounding differs, so that a step at the very edge of its allowance may fall either way: points with the same steps agree closely,
    all of them within what the tolerance lets the two differ."""
    plant = measure.prepare(measure.draw(200))
    arrays, times = (plant.program, plant.blocks, plant.starts, plant.constants), np.tile(measure.TIMES, (200, 1))
    ours = march(*arrays, times, tolerance=1e-10)
    out, samples = twin.march(*arrays, times, tolerance=1e-10)
    rows, scale = plant.program.structure.rows, np.abs(ours.samples).max(axis=(0, 1))
    assert np.zeros(samples.shape) == pytest.approx((samples - ours.samples) / scale, abs=1e-7)
    assert 0 == np.count_nonzero(np.isnan(out[:, : at.LEFT]) != np.isnan(ours.out[:, : at.LEFT]))
    same = np.all(out[:, [at.OUT_STEPS, at.OUT_REJECTED]] == ours.out[:, [at.OUT_STEPS, at.OUT_REJECTED]], axis=1)
    assert 50 < same.sum()
    assert np.zeros(samples[same].shape) == pytest.approx(((samples - ours.samples) / scale)[same], abs=1e-9)
    for name in (at.OUT_T_MAX, at.OUT_HEAT_MAX, at.OUT_DUTY_MAX, at.OUT_BEST, at.OUT_CROSSED):
        assert ours.out[same, name] == pytest.approx(out[same, name], rel=1e-9, nan_ok=True)
    for k, state in enumerate((ours.at_end, ours.at_target, ours.at_best, ours.at_last)):
        theirs = out[:, at.OUT_STATES + k * rows : at.OUT_STATES + (k + 1) * rows]
        assert state[same] / scale == pytest.approx(theirs[same] / scale, abs=1e-7, nan_ok=True)


@pytest.mark.benchmark
def test_at_most_half_as_long_again_as_the_twin(capsys):
    plants = [measure.prepare(measure.draw(1024, seed)) for seed in range(4)]

    def seconds(way: Callable[..., object]) -> float:
        begun = time.thread_time()
        for plant in plants:
            way(plant.program, plant.blocks, plant.starts, plant.constants)
        return time.thread_time() - begun

    seconds(march), seconds(twin.march)
    pairs = np.array([(seconds(march), seconds(twin.march)) for _ in range(9)])
    ratio = float(np.median(pairs[:, 0] / pairs[:, 1]))
    with capsys.disabled():
        print(f"\nkernel over its C++ twin: {ratio:.2f}; least {1e6 * pairs.min(axis=0) / 4096} us a point")
    assert 1.5 >= ratio
