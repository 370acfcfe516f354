"""Marching on from a state inside a batch: the recipe's segments cut to a stretch of time, with time counted from its start."""

import numpy as np
from numpy.typing import NDArray

from sweep.kernel import layout as at
from sweep.kernel.engine import Marched, march
from sweep.plant.recipe import TOO_HOT, Charged
from sweep.plant.values import Floats

_SAME = 1e-12  # relative; two times closer than this are one


def segment_at(plant: Charged, rows: NDArray[np.int_], time: Floats) -> NDArray[np.int_]:
    """Return in which segment a time lies, (M,); a boundary belongs to the segment that begins there."""
    ends = plant.boundaries[rows]
    inside = ends > time[:, None] * (1.0 + _SAME)
    place: NDArray[np.int_] = np.where(inside.any(axis=1), inside.argmax(axis=1), ends.shape[1] - 1)
    return place


def cut_segments(plant: Charged, rows: np.ndarray, start: Floats, stop: Floats) -> Floats:
    """Return segment blocks (M, S, block) from `start` to `stop` (M,) of the points `rows` (M,), time counted from `start`."""
    total = plant.boundaries.shape[1]
    first, last = segment_at(plant, rows, start), segment_at(plant, rows, stop)
    order = np.minimum(first[:, None] + np.arange(int((last - first).max(initial=0)) + 1), total - 1)
    blocks: Floats = plant.blocks[rows[:, None], order]
    begins = blocks[:, :, at.T_START].copy()
    blocks[:, :, at.T_START] -= start[:, None]
    ends = np.where(order == total - 1, np.inf, blocks[:, :, at.T_END])
    blocks[:, :, at.T_END] = np.minimum(ends, stop[:, None]) - start[:, None]
    fresh = np.abs(begins - start[:, None]) <= _SAME * np.abs(start[:, None])
    inside = begins > start[:, None]
    blocks[:, :, at.JACKET_SET] *= fresh | inside
    return blocks


def states_at(plant: Charged, rows: np.ndarray, start: Floats, state: Floats, times: Floats, tolerance: float) -> Floats:
    """Return states (M, K, R) at times (M, K) ascending (s), by marching on from known states (M, R) at `start` (M,)."""
    stop = np.maximum(times.max(axis=1), start)
    span = np.maximum(stop - start, 1e-6)
    blocks = cut_segments(plant, rows, start, start + span)
    constants = passive_constants(plant, rows, span)
    marched = march(plant.program, blocks, state, constants, times - start[:, None], tolerance)
    return marched.samples


def passive_constants(plant: Charged, rows: np.ndarray, span: Floats) -> Floats:
    """Return constants (M, 8) of a march that seeks no target and ends after `span` (M,) s."""
    constants: Floats = plant.constants[rows].copy()
    constants[:, at.END_FIXED] = constants[:, at.T_FINAL] = span
    constants[:, at.END_EARLIEST] = np.inf
    constants[:, at.TARGET_AMOUNT] = np.inf
    constants[:, at.TOO_HOT] = TOO_HOT
    return constants


def march_on(plant: Charged, rows: np.ndarray, blocks: Floats, state: Floats, tolerance: float, times: Floats | None = None) -> Marched:
    """March states (M, R) through given segments (M, S, block) to their end."""
    return march(plant.program, blocks, state, passive_constants(plant, rows, blocks[:, :, at.T_END].max(axis=1)), times, tolerance)
