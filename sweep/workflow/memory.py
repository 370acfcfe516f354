"""What a long search has computed so far, in a folder of the results: a file for each call, whole or not there."""

import hashlib
import io
import shutil
from collections.abc import Callable
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from sweep.base.records import write_whole

_Floats = NDArray[np.float64]
_DIGEST = 32  # bytes before the array's own


class FolderMemory:
    """Remembers arrays by what was asked and for which points. A search that is asked again asks the same, and is answered from here."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def remembered(self, what: str, points: _Floats, compute: Callable[[], _Floats]) -> _Floats:
        """Return the array computed for these points before, or compute and keep it; a damaged file counts as none."""
        key = hashlib.sha256(repr((what, points.shape)).encode() + np.ascontiguousarray(points).tobytes()).hexdigest()
        path = self.folder / f"{key[:32]}.npy"
        known = _read(path)
        if known is not None:
            return known
        found = compute()
        buffer = io.BytesIO()
        np.save(buffer, found, allow_pickle=False)
        data = buffer.getvalue()
        write_whole(path, hashlib.sha256(data).digest() + data)
        return found

    def forget(self) -> None:
        """Remove the folder: the search has ended."""
        shutil.rmtree(self.folder, ignore_errors=True)
        if self.folder.parent.is_dir() and not any(self.folder.parent.iterdir()):
            self.folder.parent.rmdir()


def _read(path: Path) -> _Floats | None:
    try:
        data = path.read_bytes()
    except OSError:
        return None
    if hashlib.sha256(data[_DIGEST:]).digest() != data[:_DIGEST]:
        return None
    return np.asarray(np.load(io.BytesIO(data[_DIGEST:]), allow_pickle=False))
