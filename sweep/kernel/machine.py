"""What an object file is made for and loaded on: this processor, as LLVM sees it, and the one name that is visible in it."""

from typing import Any

import llvmlite.binding as llvm

ENTRY = "enter"  # the object file's one visible name


def target_machine() -> Any:
    """Return LLVM's description of this processor, as numba makes it."""
    llvm.initialize_native_target()
    llvm.initialize_native_asmprinter()
    target = llvm.Target.from_triple(llvm.get_process_triple())
    name, features = llvm.get_host_cpu_name(), llvm.get_host_cpu_features().flatten()
    reloc = "static" if target.name.startswith("x86") else "default"  # LLVM's loader asks for it there
    return target.create_target_machine(cpu=name, features=features, opt=3, reloc=reloc, codemodel="jitdefault", jit=True)
