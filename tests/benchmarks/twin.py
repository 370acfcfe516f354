"""The march in C++ with explicit vectors (twin.cpp), built here where a compiler is present, through the same arrays as the kernel's door."""

import ctypes
import shutil
import subprocess
import tempfile
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np

from sweep.base import status
from sweep.kernel import balance, engine, layout, method, step
from sweep.kernel.program import Program

FLAGS = ("-O3", "-march=native", "-std=c++17", "-ffp-contract=fast", "-fno-math-errno", "-fno-signed-zeros", "-shared", "-fPIC")
COMPILER = shutil.which("g++")


def _constants() -> str:
    """Return layout.h: the kernel's names for rows and entries, its method's sizes, the outcomes."""
    whole = {name: value for module in (layout, status) for name, value in vars(module).items() if name.isupper() and isinstance(value, int)}
    whole |= {"STAGES": method.STAGES, "FRESH": method.FRESH}
    real = {"GAMMA": method.GAMMA, "BAND": balance.BAND, "REFERENCE": balance.REFERENCE, "SHARE": step._SHARE}
    return "\n".join([f"constexpr int {n} = {v};" for n, v in whole.items()] + [f"constexpr double {n} = {v!r};" for n, v in real.items()])


@cache
def built() -> Any:
    """Return the compiled twin."""
    assert COMPILER is not None
    source, folder = Path(__file__).with_name("twin.cpp"), Path(tempfile.mkdtemp(prefix="twin-"))
    (folder / "layout.h").write_text(_constants())
    subprocess.run([COMPILER, *FLAGS, f"-I{folder}", "-o", str(folder / "twin.so"), str(source)], check=True)
    return ctypes.CDLL(str(folder / "twin.so")).twin_march


def march(
    program: Program, blocks: np.ndarray, starts: np.ndarray, constants: np.ndarray, times: np.ndarray | None = None, tolerance: float = 1e-6
) -> tuple[np.ndarray, np.ndarray]:
    """Return `out` (N, all that a point leaves) and samples (N, K, rows), as the kernel writes them."""
    n, segments = blocks.shape[:2]
    times = np.full((n, 0), np.nan) if times is None else times
    blocks, starts, constants, times = (np.ascontiguousarray(a, dtype=np.float64) for a in (blocks, starts, constants, times))
    rows, scratch, whose = program.structure.rows, engine.Scratch(program), np.zeros(layout.LANES, dtype=np.int64)
    out, samples = np.full((n, layout.OUT_STATES + 4 * rows), np.nan), np.full((n, times.shape[1], rows), np.nan)
    address, number = (lambda a: ctypes.c_void_p(a.ctypes.data)), ctypes.c_int64
    built()(
        address(program.integers), address(program.floats), address(blocks), address(starts), address(constants), number(n), number(segments),
        address(times), number(times.shape[1]), address(out), number(out.shape[1]), address(samples), ctypes.c_void_p(scratch.address),
        address(whose), ctypes.c_double(tolerance), number(engine.MOST_STEPS),
    )  # fmt: skip
    assert scratch.is_sound()
    return out, samples
