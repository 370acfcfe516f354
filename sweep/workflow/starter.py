"""`new`: a commented starting study that runs as it is."""

from importlib.resources import files
from pathlib import Path

from sweep.base.errors import SurroundingsError, SweepError
from sweep.base.records import write_whole


def new_study(path: Path) -> Path:
    """Write the starting study to a new file; SweepError where one is there already."""
    if path.exists() or path.is_symlink():
        raise SweepError(f"{path} exists already; it is not overwritten")
    if not path.parent.is_dir():
        raise SurroundingsError(f"{path.parent} is no folder")
    write_whole(path, files("sweep.workflow").joinpath("starter.toml").read_bytes())
    return path
