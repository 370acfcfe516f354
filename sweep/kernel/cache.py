"""Where the compiled kernel is kept: a folder named by a digest of every kernel file, the versions and the processor.

A change in any kernel file makes a folder of its own, so old code never runs. A file in it starts with a digest of its name,
its folder's and its bytes: machine code that was damaged or moved is not read, and never runs.
"""

import contextlib
import hashlib
import os
import platform
import stat
import tempfile
from functools import cache
from importlib.metadata import version
from pathlib import Path

import llvmlite
import llvmlite.binding
import numpy as np
import platformdirs

from sweep.base.errors import SurroundingsError
from sweep.base.records import digest as digest_of
from sweep.base.records import write_whole

SOURCES = Path(__file__).parents[1]  # the package: kernel/ and what it compiles from base/
_DIGITS = 64  # of the digest in front of a file's bytes


def digest(package: Path = SOURCES) -> str:
    """Return what the compiled code depends on, as 16 hexadecimal digits."""
    seen = hashlib.sha256()
    for file in [*sorted((package / "kernel").glob("*.py")), package / "base" / "status.py"]:
        text = file.read_bytes()
        seen.update(f"{file.name} {len(text)}\n".encode() + text)
    # numba's version from its metadata: importing it takes longer than marching a batch
    seen.update(f"{version('numba')} {llvmlite.__version__} {np.__version__} {platform.python_version()}".encode())
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


def _of_this_user(home: Path) -> bool:
    """Make a folder that this user alone can write, and tell whether it is: in a place that all may write to, somebody else may have made it,
    and what lies in it would run as ours."""
    with contextlib.suppress(OSError):
        home.mkdir(mode=0o700, parents=True, exist_ok=True)
        found = home.lstat()
        return not hasattr(os, "getuid") or (stat.S_ISDIR(found.st_mode) and found.st_uid == os.getuid() and not found.st_mode & 0o022)
    return False


@cache
def folder() -> Path | None:
    """Return the first writable place for compiled code, or None where there is none."""
    name = f"kernel-{digest()}"
    given = os.environ.get("SWEEP_CACHE_DIR")
    if given:
        homes = [Path(given)]
    else:
        shared = Path(tempfile.gettempdir()) / f"sweep-reactor-{os.getuid() if hasattr(os, 'getuid') else 0}"
        homes = [Path(platformdirs.user_cache_dir("sweep-reactor")), *([shared] if _of_this_user(shared) else [])]
    return next((home / name for home in homes if _writable(home / name)), None)


def _seal(path: Path, data: bytes) -> bytes:
    return digest_of(f"{path.parent.name}/{path.name}\n".encode() + data).encode()


def read(name: str) -> bytes | None:
    """Return the bytes kept under a name, or None where there are none or they are not those that were kept."""
    place = folder()
    if place is None:
        return None
    try:
        kept = (place / name).read_bytes()
    except OSError:
        return None
    data = kept[_DIGITS:]
    return data if kept[:_DIGITS] == _seal(place / name, data) else None


def keep(name: str, data: bytes) -> None:
    """Keep bytes under a name; where the disk refuses they are not kept, and the next process makes them again."""
    place = folder()
    if place is None:
        return
    try:
        write_whole(place / name, _seal(place / name, data) + data)
    except (OSError, SurroundingsError):
        return
