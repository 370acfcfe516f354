# mypy: disable-error-code="no-untyped-call, unused-ignore"
"""From a kernel function to an object file: numba types it and makes LLVM's code of it, llvmlite makes machine code of that."""

from typing import Any

import llvmlite.binding as llvm
import numba

from sweep.kernel.machine import ENTRY, target_machine

_TYPES = {"q": numba.int64, "d": numba.float64}
_LLVM = {"q": "i64", "d": "double"}
_OUTSIDE = {"sqrt"}  # an instruction on most processors, in every C library


def _entry(module: Any, arguments: str) -> Any:
    """Return the one function that others may call; RuntimeError where it does not take what `code` hands it."""
    entry, *others = [f for f in module.functions if not f.is_declaration and f.linkage == llvm.Linkage.external]
    result, raised, *rest = [str(argument.type) for argument in entry.arguments]
    if others or not (_is_pointer(result) and _is_pointer(raised)) or rest != [_LLVM[letter] for letter in arguments]:
        raise RuntimeError(f"numba {numba.__version__} makes the kernel take {result}, {raised}, {', '.join(rest)}: not what it is called with")
    return entry


def _is_pointer(kind: str) -> bool:
    return kind == "ptr" or kind.endswith("*")


def object_code(function: Any, arguments: str) -> bytes:
    """Return a compiled kernel function as an object file whose one visible name is ENTRY.

    arguments: a letter each, q for an integer or address, d for a double. Raises RuntimeError where the code would call what is not in
    every C library: nothing else is there when it is loaded without numba.
    """
    signature = tuple(_TYPES[letter] for letter in arguments)
    function.compile(signature)
    module = llvm.parse_assembly(function.inspect_llvm(signature))
    entry = _entry(module, arguments)
    outside = [f.name for f in module.functions if f.is_declaration and not f.name.startswith("llvm.") and f.name not in _OUTSIDE]
    if outside:
        raise RuntimeError(f"the kernel calls {', '.join(outside)}, which is not there without numba")
    for part in [*module.functions, *module.global_variables]:
        if not part.is_declaration and part.name != entry.name:
            part.linkage = llvm.Linkage.internal  # a function of that name elsewhere in the process must not stand in for it
    entry.name = ENTRY
    module.verify()
    return target_machine().emit_object(module)
