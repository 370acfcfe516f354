"""What a worker of a cluster is asked to do: say what its numbers depend on, and evaluate the points that it is sent.

Nothing here imports dask; functions travel by name, so a worker has the program installed, and its version is compared with the caller's.
"""

import hashlib
import pickle
from collections.abc import Mapping
from functools import lru_cache
from importlib.metadata import version
from pathlib import Path

import llvmlite.binding
import pandas as pd

import sweep
from sweep.base.errors import SurroundingsError
from sweep.runner.manifest import versions
from sweep.runner.worker import evaluate_rows
from sweep.study.model import Study

_FOLDERS = ("base", "study", "plan", "kernel", "plant", "runner")  # whose code decides what is computed and how it travels
_WRITERS = ("matplotlib", "pyarrow")  # figures and files are made by the caller
_PROTOCOLS = ("dask", "distributed")  # what carries points and tables


@lru_cache(maxsize=1)
def source_digest() -> str:
    """Return a digest of the program's own files, 12 hexadecimal digits: two checkouts may share a version's number."""
    seen, root = hashlib.sha256(), Path(sweep.__file__).parent
    for file in sorted(file for folder in _FOLDERS for file in (root / folder).rglob("*.py")):
        seen.update(file.relative_to(root).as_posix().encode() + b"\0" + file.read_bytes() + b"\0")
    return seen.hexdigest()[:12]


@lru_cache(maxsize=1)
def _depends_on() -> tuple[tuple[str, str], ...]:
    found = {name: text for name, text in versions().items() if name not in _WRITERS}
    return tuple({**found, "sweep's files": source_digest(), **{name: version(name) for name in _PROTOCOLS}}.items())


def depends_on() -> dict[str, str]:
    """Return what must be the same here and on every worker: name -> version."""
    return dict(_depends_on())


def processor() -> str:
    """Return the kind of processor that code is compiled for: on another kind numbers agree to rounding, not bit by bit."""
    return str(llvmlite.binding.get_host_cpu_name())


def introduce() -> tuple[dict[str, str], str]:
    """Return what a worker's numbers depend on, and its kind of processor."""
    return depends_on(), processor()


def differences(here: Mapping[str, str], there: Mapping[str, str]) -> list[str]:
    """Return what differs, in words."""
    names = sorted(name for name in {*here, *there} if here.get(name) != there.get(name))
    return [f"{name} {there.get(name, 'missing')} (here {here.get(name, 'missing')})" for name in names]


@lru_cache(maxsize=2)
def _study_in(packed: bytes) -> Study:
    study = pickle.loads(packed)
    assert isinstance(study, Study)
    return study


def work(packed: bytes, expected: Mapping[str, str], points: pd.DataFrame) -> pd.DataFrame:
    """Return inputs and responses of points; SurroundingsError on a worker that joined with other versions than the caller's."""
    odd = differences(expected, depends_on())
    if odd:
        raise SurroundingsError(f"a worker that joined during the run has {', '.join(odd)}")
    return evaluate_rows(_study_in(packed), points)
