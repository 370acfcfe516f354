"""Evaluates points and plans: pieces, workers, store, progress."""

from sweep.runner.parallel import simulate
from sweep.runner.progress import Progress, Watcher
from sweep.runner.run import sweep_points
from sweep.runner.store import Store, read_manifest, read_points

__all__ = ["Progress", "Store", "Watcher", "read_manifest", "read_points", "simulate", "sweep_points"]
