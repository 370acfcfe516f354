"""Evaluates points and plans: pieces, workers, store, progress. Names are imported when they are first used: one batch needs no store."""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from sweep.runner.manifest import read_manifest
    from sweep.runner.parallel import simulate
    from sweep.runner.progress import Progress, Watcher
    from sweep.runner.run import sweep_points
    from sweep.runner.store import Store, read_points

_HOME = {
    "simulate": "parallel", "Progress": "progress", "Watcher": "progress", "sweep_points": "run", "Store": "store",
    "read_manifest": "manifest", "read_points": "store",
}  # fmt: skip
__all__ = ["Progress", "Store", "Watcher", "read_manifest", "read_points", "simulate", "sweep_points"]


def __getattr__(name: str) -> Any:
    """Import a name from the module that owns it."""
    if name not in _HOME:
        raise AttributeError(f"module 'sweep.runner' has no attribute {name!r}")
    return getattr(import_module(f"sweep.runner.{_HOME[name]}"), name)
