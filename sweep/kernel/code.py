"""Machine code: an object file in memory, called with plain C arguments. numba is imported only where there is no such file yet.

Importing numba and letting it load what it cached takes five times as long as this, and longer than marching a batch.
"""

import ctypes
import threading
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import llvmlite.binding as llvm

from sweep.kernel import cache
from sweep.kernel.layout import MARCH_TAKES
from sweep.kernel.machine import ENTRY, target_machine

_C_TYPES: dict[str, Any] = {"q": ctypes.c_int64, "d": ctypes.c_double}
_LOADING = threading.Lock()
_loaded: dict[str, "Code"] = {}  # for the whole life of the process: a function must not outlive its memory


@dataclass(frozen=True)
class Code:
    """A function in executable memory; `engine` owns the memory."""

    engine: Any
    function: Callable[..., int]

    @classmethod
    def load(cls, data: bytes, arguments: str) -> "Code":
        """Make an object file's ENTRY callable. arguments: a letter each, q for an integer or address, d for a double."""
        machine = target_machine()
        engine = llvm.create_mcjit_compiler(llvm.parse_assembly(""), machine)
        engine.add_object_file(llvm.ObjectFileRef.from_data(data))
        engine.finalize_object()
        takes = (_C_TYPES[letter] for letter in arguments)
        prototype = ctypes.CFUNCTYPE(ctypes.c_int32, ctypes.c_void_p, ctypes.c_void_p, *takes)  # runs outside Python's lock
        return cls(engine, prototype(engine.get_function_address(ENTRY)))

    def __call__(self, *values: float) -> int:
        """Run it; return its integer. RuntimeError where it reports an error of Python's, which no kernel function raises."""
        result, raised = ctypes.c_int64(), ctypes.c_void_p()  # numba's convention: both are written, the status is returned
        status = self.function(ctypes.addressof(result), ctypes.addressof(raised), *values)
        if status:
            raise RuntimeError(f"the kernel ended with status {status}")
        return result.value


def kept(name: str, arguments: str, compile_it: Callable[[], bytes]) -> Code:
    """Return a function by its name: loaded before, else from the cache, else compiled and kept there."""
    with _LOADING:
        if name not in _loaded:
            data = cache.read(name)
            if data is None:
                data = compile_it()
                cache.keep(name, data)
            _loaded[name] = Code.load(data, arguments)
        return _loaded[name]


MARCH = "march.o"


def _compile_march() -> bytes:
    from sweep.kernel.compiler import object_code  # loads numba, which a compiled kernel does not need
    from sweep.kernel.march import march

    return object_code(march, MARCH_TAKES)


def march_code() -> Code:
    """Return the compiled march."""
    return kept(MARCH, MARCH_TAKES, _compile_march)
