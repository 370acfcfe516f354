"""Canonical JSON, digests, and files that are either whole or not there."""

import contextlib
import errno
import hashlib
import json
import math
import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from sweep.base.errors import SurroundingsError


def _plain(value: Any) -> Any:
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {str(k): _plain(v) for k, v in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(v) for v in value]
    if isinstance(value, (str, int, bool)) or value is None:
        return value
    return _plain(value.item()) if hasattr(value, "item") else str(value)


def canonical(value: Any, indent: int | None = None) -> str:
    """Return JSON with sorted keys and shortest round-trip floats; NaN and infinity become null."""
    return json.dumps(_plain(value), sort_keys=True, ensure_ascii=False, allow_nan=False, indent=indent)


def digest(value: Any) -> str:
    """Return the SHA-256 of a value's canonical JSON, or of bytes as they are."""
    data = value if isinstance(value, bytes) else canonical(value).encode("utf-8", "surrogatepass")
    return hashlib.sha256(data).hexdigest()


def settle(folder: Path) -> None:
    """Flush to disk which files a folder holds, where the system can; without that a power cut may undo a rename."""
    if os.name != "posix":
        return
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    except OSError as error:
        if error.errno not in (errno.EINVAL, errno.ENOTSUP):  # a file system that flushes no folders
            raise
    finally:
        os.close(handle)


def write_whole(path: Path, data: bytes | str) -> None:
    """Write a file under a temporary dot name, flush it to disk, rename it, flush its folder; SurroundingsError where the disk refuses."""
    temporary = path.with_name(f".{path.name}.{os.getpid()}")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        with open(temporary, "wb") as file:
            file.write(data if isinstance(data, bytes) else data.encode("utf-8"))
            file.flush()
            os.fsync(file.fileno())
        os.replace(temporary, path)
        settle(path.parent)
    except BaseException as error:
        with contextlib.suppress(OSError):
            temporary.unlink(missing_ok=True)
        if isinstance(error, OSError):
            raise SurroundingsError(f"{path} cannot be written: {error.strerror or error}") from error
        raise
