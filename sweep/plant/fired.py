"""Which events one batch saw, and when."""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np

from sweep.plant.course import charge_plant
from sweep.plant.profile import batch_end
from sweep.plant.recipe import Charged
from sweep.plant.sense import one_point
from sweep.study.model import Study


class Fired(NamedTuple):
    """An event of a batch. event: its place in the study; met: when its condition was met, or its time came (s), None: never; acts: when it
    acted (s), None where the batch was over by then."""

    event: int
    met: float | None
    acts: float | None


def events_of(study: Study, point: Mapping[str, float] | None = None) -> tuple[Fired, ...]:
    """Return the events of a batch in the order in which they happened, those that did not last."""
    plant = charge_plant(study, one_point(study, point))
    return fired_in(study, plant, batch_end(plant, float(study.values["accuracy.relative"])))


def fired_in(study: Study, plant: Charged, end: float, row: int = 0) -> tuple[Fired, ...]:
    """Return the events of point `row` of a plant up to its batch's end (s)."""
    found, seen = [], set()
    happened = plant.happened
    for h, k in enumerate(happened.columns):
        met, acts = float(happened.fired[row, h]), float(happened.when[row, h])
        if np.isfinite(met) and met <= end:
            found.append(Fired(k, met, acts if acts <= end else None))
            seen.add(k)
    found.sort(key=lambda one: (one.met, one.event))
    return (*found, *(Fired(k, None, None) for k in range(len(study.events)) if k not in seen))
