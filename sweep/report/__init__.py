"""Figures and the report page, from a results folder alone."""

from pathlib import Path


def make(folder: Path) -> Path:
    """Write figures/ and report.html from a results folder and return the page's path; SweepError where the results cannot be read."""
    from sweep.report.write import make

    return make(folder)


def batch(folder: Path) -> tuple[Path, ...]:
    """Write the figures of one batch into its folder and return the paths of their SVG files."""
    from sweep.report.write import batch

    return batch(folder)
