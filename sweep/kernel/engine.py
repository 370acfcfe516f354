"""The kernel's door: NumPy arrays in, NumPy arrays out. Every shape is checked here; the compiled code checks none."""

from dataclasses import dataclass

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel.layout import LANES, STRIDE
from sweep.kernel.program import Floats, Program

MOST_STEPS = 20_000
_GUARD = -7.77e77
_GUARD_ROWS = 4


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


class Scratch:
    """Zeroed scratch memory between guard words; `address` is its first whole vector."""

    def __init__(self, program: Program) -> None:
        rows = int(program.integers[at.W_END])
        self.memory = np.zeros((rows + 2 * _GUARD_ROWS + 1) * LANES)
        start = self.memory.ctypes.data
        skipped = (-start) % STRIDE // 8
        self.address = start + 8 * (skipped + _GUARD_ROWS * LANES)
        first, last = skipped + _GUARD_ROWS * LANES, skipped + (_GUARD_ROWS + rows) * LANES
        self._guards = (self.memory[:first], self.memory[last:])
        for guard in self._guards:
            guard[:] = _GUARD

    def is_sound(self) -> bool:
        """Tell whether every guard word still stands."""
        return all(bool((guard == _GUARD).all()) for guard in self._guards)


def march(
    program: Program,
    blocks: Floats,
    starts: Floats,
    constants: Floats,
    times: Floats | None = None,
    tolerance: float = 1e-6,
    most_steps: int = MOST_STEPS,
    levels: Floats | None = None,
) -> Marched:
    """March N points through S segments.

    blocks: (N, S, block), starts: (N, R), constants: (N, 8), times: (N, K) ascending (s), NaN at the end where fewer are wanted;
    tolerance: relative error allowed per step; levels: (N, watches), what the structure's watches compare with (infinite: not armed; a point
    ends where one is met). Raises ValueError where a shape does not fit the program.
    """
    from sweep.kernel.code import march_code  # loads LLVM, which reading a study does not need

    n, segments = blocks.shape[:2]
    rows = program.structure.rows
    if blocks.shape != (n, segments, program.block) or starts.shape != (n, rows) or constants.shape != (n, at.N_CONSTANTS):
        raise ValueError(f"arrays {blocks.shape}, {starts.shape}, {constants.shape} do not fit a program of {rows} rows, block {program.block}")
    times = np.full((n, 0), np.nan) if times is None else times
    if times.shape[0] != n:
        raise ValueError(f"sample times {times.shape} for {n} points")
    levels = np.zeros((n, 0)) if levels is None else levels
    if levels.shape != (n, len(program.structure.watches)):
        raise ValueError(f"levels {levels.shape} for {n} points and {len(program.structure.watches)} watches")
    blocks, starts, constants, times, levels = (np.require(a, np.float64, ["C", "A"]) for a in (blocks, starts, constants, times, levels))
    out = np.full((n, at.OUT_STATES + 4 * rows), np.nan)
    samples = np.full((n, times.shape[1], rows), np.nan)
    scratch = Scratch(program)
    whose = np.zeros(LANES, dtype=np.int64)
    if n:
        handed_out = march_code()(
            program.integers.ctypes.data, program.floats.ctypes.data, blocks.ctypes.data, starts.ctypes.data, constants.ctypes.data,
            n, segments, times.ctypes.data, times.shape[1], levels.ctypes.data, out.ctypes.data, out.shape[1], samples.ctypes.data, scratch.address,
            whose.ctypes.data, float(tolerance), most_steps,
        )  # fmt: skip
        if handed_out != n:
            raise RuntimeError(f"the kernel took {handed_out} points of {n}")
    if not scratch.is_sound():
        raise RuntimeError("the kernel wrote outside its scratch memory: its tables do not fit it; nothing of this march can be trusted")
    ends = [out[:, at.OUT_STATES + k * rows : at.OUT_STATES + (k + 1) * rows] for k in range(4)]
    return Marched(out[:, : at.OUT_STATES], ends[0], ends[1], ends[2], ends[3], samples)
