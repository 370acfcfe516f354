"""Design-space sweep and optimisation engine for batch and fed-batch chemical reactors.

The names below are imported when they are first used, so that the command line answers at once.
"""

from importlib import import_module
from typing import Any

__version__ = "0.1.0"
__all__ = ["SweepError", "__version__", "profile", "read_study", "run", "simulate"]

_HOME = {
    "SweepError": "sweep.base.errors",
    "read_study": "sweep.study",
    "simulate": "sweep.runner",
    "profile": "sweep.plant",
    "run": "sweep.workflow.run",
}


def __getattr__(name: str) -> Any:
    """Import a public name from the layer that owns it."""
    if name not in _HOME:
        raise AttributeError(f"module 'sweep' has no attribute {name!r}")
    return getattr(import_module(_HOME[name]), name)
