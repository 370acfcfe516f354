"""The plan's points as a whole: how many came to what, and which failed."""

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import pandas as pd

from sweep.base.units import si_unit, suffix
from sweep.plant import holds, margins
from sweep.study.model import Study

MOST_LISTED = 1000  # failed points in the table


@dataclass(frozen=True)
class Overview:
    """statuses: how many points of each; all_hold: how many hold every limit; failed: those not done, with their reasons."""

    planned: int
    kind: str
    statuses: Counter[str]
    all_hold: int | None
    failed: pd.DataFrame

    def summary(self) -> dict[str, Any]:
        """Return the block points."""
        counts = {status: self.statuses[status] for status in ("done", "runaway", "failed")}
        return {"planned": self.planned, "plan": self.kind, **counts, "all_hold": self.all_hold, "listed": len(self.failed)}

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return the points that are not done."""
        return {"failed_points": self.failed}


def overlook(study: Study, kind: str, inputs: tuple[str, ...], tables: Iterable[pd.DataFrame]) -> Overview:
    """Count the points of a plan, a table at a time."""
    statuses: Counter[str] = Counter()
    good, total = 0, 0
    failed: list[pd.DataFrame] = []
    for table in tables:
        total += len(table)
        statuses.update(table["status"].tolist())
        good += int(holds(margins(study, table)).sum())
        if sum(len(part) for part in failed) < MOST_LISTED:
            failed.append(table.loc[table["status"] != "done", [*inputs, "status", "reason"]])
    listed = pd.concat(failed).iloc[:MOST_LISTED] if failed else pd.DataFrame(columns=[*inputs, "status", "reason"])
    names = {name: name + suffix(si_unit(study.dimensions[study.paths_of(name)[0]])) for name in inputs}
    return Overview(total, kind, statuses, good if study.limits or study.target else None, listed.rename(columns=names).reset_index(names="point"))
