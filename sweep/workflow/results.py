"""Where results go, and how a table becomes a file."""

from pathlib import Path

import pandas as pd

from sweep.study.model import Study


def folder_of(study: Study, out: str | Path | None = None) -> Path:
    """Return the results folder: as asked, or results/<the study file's name>/ where the program is called."""
    name = study.name if study.name.strip(".") else "study"  # a file named "...toml" must not lead out of results/
    return Path(out) if out is not None else Path("results") / name


def as_csv(table: pd.DataFrame) -> str:
    """Return a table as CSV with numbers that read back exactly; null is empty."""
    return table.to_csv(index=False, lineterminator="\n")
