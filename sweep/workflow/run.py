"""`run`: all that a study asks for. What an interrupted run finished stays; the rest is computed."""

import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any, Protocol

import pandas as pd

from sweep.analysis import statements
from sweep.analysis.batch_time import best_batch_time
from sweep.analysis.chance_map import assess_map
from sweep.analysis.deviations import look_at_deviations
from sweep.analysis.failure import fail_cooling
from sweep.analysis.optimum import assess_optimum
from sweep.analysis.overview import overlook
from sweep.analysis.ranges import assess_ranges
from sweep.analysis.risk import assess_risk
from sweep.analysis.sensitivity import assess_sensitivity
from sweep.analysis.set_point import SetPoint, look_at_set_point
from sweep.analysis.window import window
from sweep.base.records import canonical
from sweep.chance import Memory
from sweep.plan import planned
from sweep.plant import limits, margins
from sweep.runner import Store, Watcher, read_manifest, read_points, simulate, sweep_points
from sweep.study.model import Study
from sweep.workflow.memory import FolderMemory
from sweep.workflow.results import as_csv, folder_of

SCHEMA = 1
Teller = Callable[[str], None]


class Found(Protocol):
    """What every analysis returns."""

    def summary(self) -> dict[str, Any]:
        """Return its block of summary.json."""

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return its tables."""


@dataclass(frozen=True)
class Run:
    """A finished run: its folder and what summary.json holds."""

    folder: Path
    summary: dict[str, Any]

    def points(self) -> Iterator[pd.DataFrame]:
        """Yield the tables of points, a file at a time."""
        return read_points(self.folder, self.summary["points"]["planned"])


def run(
    study: Study, out: str | Path | None = None, workers: int | None = None, fresh: bool = False,
    watcher: Watcher | None = None, tell: Teller | None = None, figures: bool = True,
) -> Run:  # fmt: skip
    """Compute all that a study asks for into a results folder, going on where an interrupted run stopped.

    out: the folder (default results/<study's file name>/); workers: default all cores; fresh: move earlier results aside; watcher: told how
    far the points are; tell: told what is being done. SweepError, ForeignResultsError, SurroundingsError as their names say.
    """
    folder, plan = folder_of(study, out), planned(study)
    say = tell or (lambda _: None)
    with Store(folder, study, plan, fresh) as store:
        if store.broke_off:
            say("an earlier run here ended without a word: points are evaluated in processes of their own, so that a crash costs one of them")
        sweep_points(store, workers, watcher)
        steps = _Steps(store, study, workers, say)
        summary = steps.summary()
        store.add("summary.json", canonical(summary, indent=1) + "\n")
        store.manifest["state"] = "complete"
        store.save()
        if figures:
            from sweep import report

            say("figures and report")
            report.make(folder)
    return Run(folder, summary)


class _Steps:
    """The analyses of one run, each kept in the manifest as soon as it is done."""

    def __init__(self, store: Store, study: Study, workers: int | None, say: Teller) -> None:
        self.store, self.study, self.workers, self.say = store, study, workers, say
        self._seen: SetPoint | None = None
        self._judged = study.judged()

    def _evaluate(self, points: pd.DataFrame) -> pd.DataFrame:
        return simulate(self.study, points, self.workers, self.store.broke_off)

    def _judge(self, points: pd.DataFrame) -> pd.DataFrame:
        return simulate(self._judged, points, self.workers)

    def _kept(self, name: str, title: str, find: Callable[[], Found]) -> dict[str, Any]:
        """Return an analysis' block, from the manifest where its tables are there whole."""
        kept = self.store.manifest["analyses"].get(name)
        if kept is not None and all(self.store.whole(file) for file in kept["files"]):
            return dict(kept["block"])
        self.say(title)
        begun = time.monotonic()
        found = find()
        files = []
        for table, frame in found.tables().items():
            files.append(f"analyses/{table}.csv")
            self.store.add(files[-1], as_csv(frame))
        self.store.manifest["analyses"][name] = {"block": found.summary(), "files": files}
        self.store.save()
        self.store.log(what=name, seconds=round(time.monotonic() - begun, 3))
        return found.summary()

    def _set_point(self) -> SetPoint:
        if self._seen is None:
            self._seen = look_at_set_point(self.study, self._evaluate, self.store.tables())
        return self._seen

    def summary(self) -> dict[str, Any]:
        """Return summary.json, computing what is not there yet."""
        study, plan = self.study, self.store.plan
        blocks = self._kept("set_point", "set-point", self._set_point)
        blocks["points"] = self._kept("points", "overview", lambda: overlook(study, plan.kind, plan.columns, self.store.tables()))
        blocks["batch_time"] = self._batch_time()
        blocks["window"] = self._window()
        blocks["failure"] = self._failure()
        blocks["deviations"] = self._deviations()
        blocks["risk"] = self._risk()
        blocks["sensitivity"] = self._sensitivity()
        blocks["probability_map"] = self._map()
        blocks["ranges"] = self._ranges()
        blocks["optimum"] = self._optimum()
        self.store.add("analyses/inputs.csv", as_csv(statements.inputs(study)))
        warnings = [f"{w.key}: {w.found}; expected {w.expected}; {w.because}" for w in study.warnings]
        return {
            "schema": SCHEMA, "study": {"name": study.name, "title": study.title, "digest": study.digest, "seed": study.seed},
            **blocks, "warnings": warnings, "cautions": [*statements.cautions(study), *blocks["failure"].get("cautions", [])],
            "assumptions": statements.assumptions(study), "not_assessed": statements.not_assessed(study),
        }  # fmt: skip

    def _batch_time(self) -> dict[str, Any]:
        if self.study.target is None:
            return {"not_assessed": "the study has no [target]"}
        if self.study.batch_time is None:
            return {"not_assessed": "the study has no [batch_time]"}
        quick = self.study.without_failure()
        evaluate = partial(simulate, quick, workers=self.workers, apart=self.store.broke_off)
        return self._kept("batch_time", "batch time", lambda: best_batch_time(quick, evaluate, self._set_point().row))

    def _window(self) -> dict[str, Any]:
        if self.study.window is None:
            return {"not_assessed": "the study has no [window]"}
        if not limits(self.study):
            return {"not_assessed": "the study has no limits and no target: there is nothing that a window could hold"}
        return self._kept("window", "operating window", lambda: window(self._judged, self._judge, margins, limits(self._judged)))

    def _failure(self) -> dict[str, Any]:
        if not self.study.asks_failure:
            return {"not_assessed": "the study has no [failure], and no limit asks for one of its figures"}
        return self._kept("failure", "cooling failure", lambda: fail_cooling(self.study, self._set_point().row))

    def _deviations(self) -> dict[str, Any]:
        if not self.study.scenarios:
            return {"not_assessed": "the study has no [scenarios] and no [deviations]"}
        return self._kept("deviations", "deviations", lambda: look_at_deviations(self.study, self._set_point().point))

    def _risk(self) -> dict[str, Any]:
        if self.study.risk is None:
            return {"not_assessed": "the study has no [risk]"}
        return self._kept("risk", "risk at the set-point", lambda: assess_risk(self._judged, self._judge))

    def _sensitivity(self) -> dict[str, Any]:
        if self.study.sensitivity is None:
            return {"not_assessed": "the study has no [sensitivity]"}
        return self._kept("sensitivity", "sensitivity", lambda: assess_sensitivity(self._judged, self._judge))

    def _searched(self, name: str, title: str, find: Callable[[Memory], Found]) -> dict[str, Any]:
        """Return the block of a long search, which goes on where it was interrupted."""
        memory = FolderMemory(self.store.folder / "searches" / name)
        block = self._kept(name, title, lambda: find(memory))
        memory.forget()
        return block

    def _map(self) -> dict[str, Any]:
        if self.study.map is None:
            return {"not_assessed": "the study asks for no map in [risk]"}
        if not limits(self.study):
            return {"not_assessed": "the study has no limits and no target, which could hold with a probability"}
        return self._searched("probability_map", "probability map", lambda memory: assess_map(self.study, self._evaluate, memory))

    def _ranges(self) -> dict[str, Any]:
        if self.study.ranges is None:
            return {"not_assessed": "the study has no [ranges]"}
        if not limits(self.study):
            return {"not_assessed": "the study has no limits and no target: every setting is acceptable"}
        return self._searched("ranges", "acceptable ranges", lambda memory: assess_ranges(self.study, self._evaluate, memory))

    def _optimum(self) -> dict[str, Any]:
        if self.study.optimum is None:
            return {"not_assessed": "the study has no [optimum]"}
        return self._searched("optimum", "optimum", lambda memory: assess_optimum(self.study, self._evaluate, memory))


def stored(folder: str | Path) -> dict[str, Any] | None:
    """Return the manifest of a results folder, None where there is none."""
    return read_manifest(Path(folder))
