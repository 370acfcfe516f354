"""`batch`: one batch, its profile, its limits with their margins, and what a cooling failure would do to it."""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any

from sweep.analysis import statements
from sweep.analysis.deviations import Deviations, look_at_deviations
from sweep.analysis.failure import CoolingFailure, fail_cooling
from sweep.analysis.overlay import Overlay, lay_over
from sweep.analysis.set_point import SetPoint, look_at_set_point
from sweep.base.errors import SweepError
from sweep.base.records import canonical, write_whole
from sweep.plan import set_point
from sweep.runner import simulate
from sweep.study.measured import read_measured
from sweep.study.model import Study
from sweep.workflow.results import as_csv, folder_of

SCHEMA = 1
NO_SCENARIOS = "the study has no [scenarios] and no [deviations]"


@dataclass(frozen=True)
class OneBatch:
    """seen: the batch and its limits; failed: its cooling failures, None where the study asks for none; folder: where it is written;
    deviations: the batch under each scenario, overlay: a measured batch over it, None where there is none."""

    study: Study
    seen: SetPoint
    failed: CoolingFailure | None
    folder: Path
    deviations: Deviations | None = None
    overlay: Overlay | None = None


def point_of(study: Study, settings: Mapping[str, str]) -> dict[str, float]:
    """Return the set-point with some names (variables or dotted paths) set to quantities with units; SweepError for what is not there
    or not of the right dimension, or where two settings set one thing."""
    point = set_point(study)
    owners = {path: name for name in settings for path in study.paths_of(name)}
    for name in settings:
        for path in study.paths_of(name):
            if owners[path] != name:
                raise SweepError(f"{name} and {owners[path]} both set {path}")
    for name, text in settings.items():
        value = study.quantity(name, text)
        if name not in point:  # a path of its own takes precedence over the variable that sets it
            for variable in study.variables:
                if name in variable.sets:
                    if len(variable.sets) > 1 or variable.name in settings:
                        raise SweepError(f"{name} is set by the variable {variable.name}; set that one")
                    point.pop(variable.name, None)
        point[name] = value
    return point


def batch(
    study: Study, settings: Mapping[str, str] | None = None, out: str | Path | None = None, figures: bool = True, data: str | Path | None = None,
) -> OneBatch:
    """March one batch (`settings`: name -> quantity with its unit) and write profile, limits and figures into <results>/batch/; data: a CSV
    file of a measured batch that is laid over it."""
    measured = read_measured(study, data) if data is not None else None
    point = point_of(study, settings or {})
    evaluate = partial(simulate, study, workers=1)
    seen = look_at_set_point(study, evaluate, (), point)
    failed = fail_cooling(study, seen.row, point) if study.asks_failure and seen.row["status"] == "done" else None
    folder = folder_of(study, out) / "batch"
    deviations = look_at_deviations(study, point) if study.scenarios else None
    overlay = lay_over(study, point, measured) if measured is not None else None
    _write(study, seen, failed, deviations, overlay, folder)
    if figures:
        from sweep import report

        report.batch(folder)
    return OneBatch(study, seen, failed, folder, deviations, overlay)


def _write(
    study: Study, seen: SetPoint, failed: CoolingFailure | None, deviations: Deviations | None, overlay: Overlay | None, folder: Path
) -> None:
    more = {name: table for part in (failed, deviations, overlay) if part is not None for name, table in part.tables().items()}
    for stale in ("measured", "measured_residuals", "deviations"):  # of an earlier batch in this folder
        (folder / "analyses" / f"{stale}.csv").unlink(missing_ok=True)
    found = {**seen.tables(), **more, "inputs": statements.inputs(study, seen.point)}
    for name, table in found.items():
        write_whole(folder / "analyses" / f"{name}.csv", as_csv(table))
    summary: dict[str, Any] = {
        "schema": SCHEMA, "study": {"name": study.name, "title": study.title, "digest": study.digest, "seed": study.seed},
        **seen.summary(), "failure": failed.summary() if failed else {"not_assessed": "not asked for, or the batch did not come to its end"},
        "deviations": deviations.summary() if deviations else {"not_assessed": NO_SCENARIOS},
        "cautions": statements.cautions(study), "assumptions": statements.assumptions(study), "not_assessed": statements.not_assessed(study),
    }  # fmt: skip
    if overlay is not None:
        summary["measured"] = overlay.summary()
    write_whole(folder / "summary.json", canonical(summary, indent=1) + "\n")
