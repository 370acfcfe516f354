"""A small door into single kernel functions: states into scratch memory, one function run, results out of it."""

import hashlib
from pathlib import Path

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel.balance import right_side
from sweep.kernel.code import Code, kept
from sweep.kernel.compiler import object_code
from sweep.kernel.engine import Scratch
from sweep.kernel.functions import exp, log
from sweep.kernel.jacobian import start_of_step
from sweep.kernel.lane import references
from sweep.kernel.layout import LANES, STRIDE
from sweep.kernel.linear import factorise, solve
from sweep.kernel.memory import load, row, store
from sweep.kernel.program import Program
from sweep.kernel.vector import compiled

BALANCES, SOLVE, FUNCTIONS = range(3)


@compiled
def _run(s, f, w, what):  # type: ignore[no-untyped-def]
    lanes = row(s, w, at.W_LANE)
    if what == BALANCES:
        for lane in range(LANES):
            references(s, w, 8 * lane)
        start_of_step(s, f, w, load(lanes, at.L_TIME))
        right_side(s, f, w, row(s, w, at.W_Y), load(lanes, at.L_TIME), row(s, w, at.W_NEW))
    if what == SOLVE:
        factorise(s, w, load(lanes, at.L_STEP))
        solve(s, w, row(s, w, at.W_K))
    if what == FUNCTIONS:
        x = load(lanes, 0)
        store(lanes, 1, exp(x))
        store(lanes, 2, log(x))
    return what


def _code() -> Code:
    """Return the compiled `_run`, under a name that changes with this file."""
    name = f"probe-{hashlib.sha256(Path(__file__).read_bytes()).hexdigest()[:16]}.o"
    return kept(name, "qqqq", lambda: object_code(_run, "qqqq"))


class Probe:
    """Scratch memory of a program, its arrays by name: each (rows, LANES)."""

    def __init__(self, program: Program) -> None:
        self.program, self.scratch = program, Scratch(program)
        head = program.integers
        first = (self.scratch.address - self.scratch.memory.ctypes.data) // 8
        self.rows = self.scratch.memory[first : first + int(head[at.W_END]) * LANES].reshape(-1, LANES)
        assert (self.rows.ctypes.data - self.scratch.address) == 0
        assert STRIDE == self.rows.strides[0]

    def array(self, name: int, count: int) -> np.ndarray:
        """Return a view of an array's first rows."""
        first = int(self.program.integers[name])
        return self.rows[first : first + count]

    def lane(self, name: int) -> np.ndarray:
        """Return a view of one of the lanes' own numbers, (LANES,)."""
        return self.array(at.W_LANE, at.LANE_ROWS)[name]

    def run(self, what: int) -> None:
        """Run one function on all lanes; the guard words must stand."""
        _code()(self.program.integers.ctypes.data, self.program.floats.ctypes.data, self.scratch.address, what)
        assert self.scratch.is_sound()

    def matrix(self) -> np.ndarray:
        """Return what stands in the slots as matrices, (LANES, rows, rows)."""
        n, head = self.program.structure.rows, self.program.integers
        slots = head[head[at.AT_SLOTS] : head[at.AT_SLOTS] + n * n].reshape(n, n)
        values = self.array(at.W_SLOTS, int(head[at.N_SLOTS]))
        return np.where(slots[None] >= 0, values[slots].transpose(2, 0, 1), 0.0)
