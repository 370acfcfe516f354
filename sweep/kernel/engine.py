"""The kernel's door: NumPy arrays in, NumPy arrays out. Every shape is checked here; the compiled code checks none."""

from dataclasses import dataclass

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel.march import march as _march
from sweep.kernel.program import Floats, Program
from sweep.kernel.vector import LANES, STRIDE

MOST_STEPS = 20_000


@dataclass(frozen=True)
class Marched:
    """What a march left. N points, R rows of state, K sample times.

    out: (N, OUT_STATES) by the names OUT_* of `layout`; at_end, at_target, at_best, at_last: (N, R) states (NaN where there was none);
    samples: (N, K, R) states at the times asked for (NaN beyond the march's end).
    """

    out: Floats
    at_end: Floats
    at_target: Floats
    at_best: Floats
    at_last: Floats
    samples: Floats


def _scratch(program: Program) -> tuple[np.ndarray, int]:
    """Return zeroed scratch memory and the address of its first whole vector."""
    rows = int(program.integers[at.W_END]) + 2
    memory = np.zeros(rows * LANES + LANES)
    return memory, (memory.ctypes.data + STRIDE - 1) // STRIDE * STRIDE


def march(
    program: Program,
    blocks: Floats,
    starts: Floats,
    constants: Floats,
    times: Floats | None = None,
    tolerance: float = 1e-6,
    most_steps: int = MOST_STEPS,
) -> Marched:
    """March N points through S segments.

    blocks: (N, S, block), starts: (N, R), constants: (N, 8), times: (N, K) ascending (s), NaN at the end where fewer are wanted;
    tolerance: relative error allowed per step. Raises ValueError where a shape does not fit the program.
    """
    n, segments = blocks.shape[:2]
    rows = program.structure.rows
    if blocks.shape != (n, segments, program.block) or starts.shape != (n, rows) or constants.shape != (n, at.N_CONSTANTS):
        raise ValueError(f"arrays {blocks.shape}, {starts.shape}, {constants.shape} do not fit a program of {rows} rows, block {program.block}")
    times = np.full((n, 0), np.nan) if times is None else times
    if times.shape[0] != n:
        raise ValueError(f"sample times {times.shape} for {n} points")
    blocks, starts, constants, times = (np.require(a, np.float64, ["C", "A"]) for a in (blocks, starts, constants, times))
    out = np.full((n, at.OUT_STATES + 4 * rows), np.nan)
    samples = np.full((n, times.shape[1], rows), np.nan)
    memory, scratch = _scratch(program)
    whose = np.zeros(LANES, dtype=np.int64)
    if n:
        _march(
            program.integers.ctypes.data, program.floats.ctypes.data, blocks.ctypes.data, starts.ctypes.data, constants.ctypes.data,
            n, segments, times.ctypes.data, times.shape[1], out.ctypes.data, out.shape[1], samples.ctypes.data, scratch,
            whose.ctypes.data, float(tolerance), most_steps,
        )  # fmt: skip
    del memory
    ends = [out[:, at.OUT_STATES + k * rows : at.OUT_STATES + (k + 1) * rows] for k in range(4)]
    return Marched(out[:, : at.OUT_STATES], ends[0], ends[1], ends[2], ends[3], samples)
