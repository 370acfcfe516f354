"""A results folder read whole: manifest, answers, tables. Text from the user is made harmless here, once."""

import json
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pandas as pd

from sweep.base.errors import SurroundingsError, SweepError
from sweep.base.records import digest
from sweep.runner.manifest import sealed

TABLES = (
    "set_point_profile", "batch_time", "batch_time_map", "window_grid", "window_boundary",
    "failure_times", "failure_path", "limits", "failed_points", "inputs", "measured", "risk_limits", "risk_percentiles", "risk_exceedance",
    "risk_drivers", "sensitivity_screening", "sensitivity_shares", "sensitivity_local", "sensitivity_spread",
    "probability_map", "ranges", "ranges_corners", "optimum_search", "optimum_front",
)  # fmt: skip


@dataclass(frozen=True)
class Results:
    """What a run left behind. `tables` holds those that are there; SI throughout."""

    folder: Path
    summary: Mapping[str, Any]
    manifest: Mapping[str, Any] = field(default_factory=dict)
    tables: Mapping[str, pd.DataFrame] = field(default_factory=dict)

    def block(self, name: str) -> Mapping[str, Any]:
        """Return a block of the summary, empty where it is missing or was not assessed."""
        found = self.summary.get(name)
        return found if isinstance(found, Mapping) and "not_assessed" not in found else {}

    def why_not(self, name: str) -> str:
        """Return why a block holds no answer; empty where it holds one."""
        found = self.summary.get(name)
        if isinstance(found, Mapping):
            return str(found["not_assessed"]) if "not_assessed" in found else ""
        return f"the results hold no block named {name}"

    def table(self, name: str) -> pd.DataFrame | None:
        """Return a table of analyses/, or None where it is missing or has no rows."""
        found = self.tables.get(name)
        return found if found is not None and len(found) else None


def clean(text: str, keep: str = "") -> str:
    """Return text without signs that break a page or a figure: control, direction and unpaired signs become U+FFFD, line ends a space.

    Signs in `keep` stay as they are.
    """
    spaced = text if keep else text.replace("\r\n", " ").replace("\n", " ").replace("\t", " ")
    bad = ("Cc", "Cf", "Cs", "Co", "Cn")
    return "".join("\ufffd" if unicodedata.category(sign) in bad and sign not in keep else sign for sign in spaced)


def _clean(value: Any) -> Any:
    if isinstance(value, str):
        return clean(value)
    if isinstance(value, Mapping):
        return {clean(str(key)): _clean(item) for key, item in value.items()}
    return [_clean(item) for item in value] if isinstance(value, list) else value


def _document(path: Path) -> dict[str, Any]:
    try:
        found = json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise SweepError(f"{path.parent} is not a results folder: {path.name} is missing") from None
    except (OSError, ValueError) as error:
        raise SurroundingsError(f"{path} cannot be read: {error}") from error
    if not isinstance(found, dict):
        raise SurroundingsError(f"{path} cannot be read: it holds no table of answers")
    return found


def _table(path: Path) -> pd.DataFrame:
    try:
        table = pd.read_csv(path, keep_default_na=False, na_values=["", "nan", "NaN"])
    except pd.errors.EmptyDataError:
        return pd.DataFrame()
    except (OSError, ValueError) as error:
        raise SurroundingsError(f"{path} cannot be read: {error}") from error
    words = [name for name in table.columns if not pd.api.types.is_numeric_dtype(table[name])]
    for name in words:
        table[name] = table[name].map(_clean)
    return table.rename(columns=lambda name: clean(str(name)))


def _tables(folder: Path) -> dict[str, pd.DataFrame]:
    paths = {name: folder / "analyses" / f"{name}.csv" for name in TABLES}
    return {name: _table(path) for name, path in paths.items() if path.is_file()}


def _intact(folder: Path, manifest: Mapping[str, Any]) -> None:
    """SurroundingsError where the manifest, or an answer or table that it lists, does not hold what was written."""
    if "digest" in manifest and manifest != sealed(manifest):
        raise SurroundingsError(f"{folder / 'manifest.json'} is damaged: it does not hold what was written")
    known = manifest.get("files", {})
    for name in sorted(name for name in known if name == "summary.json" or name.startswith("analyses/")):
        path = folder / name
        if not path.is_file() or digest(path.read_bytes()) != known[name]:
            raise SurroundingsError(f"{path} is damaged: it does not hold what was written; `sweep run` computes it again")


def read(folder: Path, whole: bool = True) -> Results:
    """Return the results in a folder; without `whole`, of one batch, which has no manifest. SweepError where they cannot be read."""
    manifest = _document(folder / "manifest.json") if whole else {}
    summary = _clean(_document(folder / "summary.json"))
    _intact(folder, manifest)
    text = clean(str(manifest.get("study", "")), keep="\n\t")
    return Results(folder, summary, {**_clean(manifest), "study": text}, _tables(folder))
