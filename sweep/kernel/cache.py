"""Where the compiled kernel is kept: a folder named by a digest of every kernel file, the versions and the processor.

numba looks only at the file of the function it compiles, so a change in a callee elsewhere would run old code; a new folder
for every change cannot. Must be set before any kernel function is defined.
"""

import hashlib
import os
import platform
import tempfile
from pathlib import Path

import llvmlite
import numba
import numpy as np
import platformdirs


def digest() -> str:
    """Return what the compiled code depends on, as 16 hexadecimal digits."""
    seen = hashlib.sha256()
    folder = Path(__file__).parent
    for file in [*sorted(folder.glob("*.py")), folder.parent / "base" / "status.py"]:
        seen.update(file.read_bytes())
    seen.update(f"{numba.__version__} {llvmlite.__version__} {np.__version__} {platform.python_version()}".encode())
    seen.update(f"{llvmlite.binding.get_host_cpu_name()} {llvmlite.binding.get_host_cpu_features().flatten()}".encode())
    return seen.hexdigest()[:16]


def _writable(folder: Path) -> bool:
    """Tell whether files can be made in a folder, making it if needed."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe, name = tempfile.mkstemp(prefix=".probe-", dir=folder)
        os.close(probe)
        os.unlink(name)
    except OSError:
        return False
    return True


def find_folder() -> Path | None:
    """Return the first writable place for compiled code, or None where there is none."""
    name = f"kernel-{digest()}"
    given = os.environ.get("SWEEP_CACHE_DIR")
    homes = [Path(given)] if given else [Path(platformdirs.user_cache_dir("sweep-reactor")), Path(tempfile.gettempdir()) / "sweep-reactor"]
    return next((home / name for home in homes if _writable(home / name)), None)


FOLDER = find_folder()
if FOLDER is not None:
    numba.config.CACHE_DIR = str(FOLDER)  # type: ignore[attr-defined]


def is_empty() -> bool:
    """Tell whether the kernel has still to be compiled on this machine."""
    return FOLDER is None or not any(FOLDER.rglob("march.march-*.nbi"))
