"""The target: conversion, the time to reach it, the most productive time, and why it is never reached. N points."""

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel.engine import Marched
from sweep.plant import rates, states
from sweep.plant.onward import segment_at
from sweep.plant.recipe import Charged
from sweep.plant.samples import Batch
from sweep.plant.values import Floats
from sweep.study.model import Study

CAUSES = ("", "not enough reactant", "equilibrium", "too slow")
_BALANCED = 0.01  # a net rate below this share of the forward one is an equilibrium


def product_mass(study: Study) -> float | None:
    """Return the product's molar mass (kg/mol), None where it is not written or there is no product."""
    if study.target is None or study.target.product is None:
        return None
    return study.values.get(f"species.{study.target.product}.molar_mass")


def productivity_unit(study: Study) -> str:
    """Return "kg", or "mol" where the product has no molar mass."""
    return "mol" if product_mass(study) is None else "kg"


def vessel_volume(plant: Charged) -> Floats:
    """Return the vessel's volume (m3), (N,); the whole fill where no vessel is written."""
    return plant.values.get("vessel.volume", plant.brought.volume + plant.brought.feed_volume.sum(axis=1))


def target_columns(study: Study, plant: Charged, marched: Marched, batch: Batch, moles: Floats) -> dict[str, Floats]:
    """Return conversion, times and productivities, each (N,); moles (N, I) at the batch's end."""
    out, values, end = marched.out, plant.values, batch.end
    turnaround = values.get("recipe.turnaround")
    crossed = np.isfinite(out[:, at.OUT_CROSSED])
    ok = crossed if study.batch_to_target else np.ones(values.count, dtype=bool)
    found = {"time_to_target_s": out[:, at.OUT_CROSSED], "cycle_time_s": np.where(ok, end + turnaround, np.nan)}
    if study.target is None:
        return {**found, "conversion": np.full(values.count, np.nan)}
    k = [s.name for s in study.species].index(study.target.species)
    weights, nz = plant.program.structure.target, plant.program.structure.sources.shape[0]
    brought = plant.brought.total()[:, k]
    at_start = plant.starts[:, :nz] @ weights
    fed = np.einsum("nf,nf->n", plant.brought.share(end), plant.brought.fed[:, :, k])
    found["conversion"] = (plant.brought.charged[:, k] + fed - moles[:, k]) / brought
    if study.batch_to_target:  # the batch ended where the target was reached: what is left of the gap is rounding
        wanted = values.get("target.conversion")
        found["conversion"] = np.where(crossed & (np.abs(found["conversion"] - wanted) < 1e-9), wanted, found["conversion"])
    found["highest_conversion"] = (out[:, at.OUT_REACTED_MAX] - at_start) / brought
    if study.target.product is not None:
        found.update(_productive(study, plant, marched, batch, moles, ok))
        found["most_productive_conversion"] = (marched.at_best[:, :nz] @ weights - at_start) / brought
    return found


def _productive(study: Study, plant: Charged, marched: Marched, batch: Batch, moles: Floats, ok: np.ndarray) -> dict[str, Floats]:
    """Return productivities: as written, at the target, and at the most productive time."""
    out, values, nz = marched.out, plant.values, plant.program.structure.sources.shape[0]
    unit, product, turnaround = productivity_unit(study), plant.program.structure.product, values.get("recipe.turnaround")
    per = (product_mass(study) or 1.0) / vessel_volume(plant)
    assert study.target is not None
    p = [s.name for s in study.species].index(str(study.target.product))
    formed = moles[:, p] - plant.brought.total()[:, p]
    last_feed = plant.brought.last_feed()
    when = np.maximum(out[:, at.OUT_CROSSED], last_feed)
    there = np.where((out[:, at.OUT_CROSSED] < last_feed)[:, None], _state_at(batch, last_feed), marched.at_target)
    at_target = (there[:, :nz] - plant.starts[:, :nz]) @ product
    charged = plant.starts[:, :nz] @ product  # amounts mode counts what was charged; the most productive time is of what is formed
    best = (marched.at_best[:, :nz] @ product - charged) / (out[:, at.OUT_BEST_TIME] + turnaround)
    return {
        f"productivity_{unit}_per_m3_s": np.where(ok, per * formed / (batch.end + turnaround), np.nan),
        f"at_target_{unit}_per_m3_s": per * at_target / (when + turnaround),
        "most_productive_time_s": out[:, at.OUT_BEST_TIME],
        f"most_productive_{unit}_per_m3_s": per * best,
    }


def _state_at(batch: Batch, time: Floats) -> Floats:
    """Return the states (N, R) at the samples nearest to a time (N,) s that is one of the recipe's boundaries."""
    nearest = np.abs(np.where(batch.inside, batch.times, np.inf) - time[:, None]).argmin(axis=1)
    return batch.states[np.arange(time.size), nearest]


def why_not(study: Study, plant: Charged, marched: Marched) -> np.ndarray:
    """Return why the target is never reached, (N,) places in CAUSES; 0 where it is reached."""
    cause = np.zeros(plant.values.count, dtype=int)
    if study.target is None:
        return cause
    never = np.isnan(marched.out[:, at.OUT_CROSSED])
    if not never.any():
        return cause
    conversion = plant.values.get("target.conversion")
    k = [s.name for s in study.species].index(study.target.species)
    consuming = [j for j, r in enumerate(study.reactions) if r.stoichiometry.get(study.target.species, 0.0) < 0.0]
    short = _reachable(study, plant, k, consuming) < conversion - 1e-9
    cause[never] = np.where(short[never], 1, np.where(_at_equilibrium(study, plant, marched, consuming)[never], 2, 3))
    return cause


def _reachable(study: Study, plant: Charged, k: int, consuming: list[int]) -> Floats:
    """Return the conversion at which the other reactants of the target's reactions would run out, (N,)."""
    total = plant.brought.total()
    left = total.copy()
    index = {s.name: i for i, s in enumerate(study.species)}
    for j in consuming:
        nu = np.zeros(len(index))
        for name, n in study.reactions[j].stoichiometry.items():
            nu[index[name]] = n
        used = np.flatnonzero(nu < 0.0)
        left = left + np.maximum((left[:, used] / -nu[used]).min(axis=1), 0.0)[:, None] * nu
    return 1.0 - left[:, k] / total[:, k]


def _at_equilibrium(study: Study, plant: Charged, marched: Marched, consuming: list[int]) -> np.ndarray:
    """Tell where the reversible reactions that consume the target stand still at the march's end, (N,)."""
    reversible = [j for j in consuming if study.reactions[j].reversible]
    if not reversible or len(reversible) < len(consuming):
        return np.zeros(plant.values.count, dtype=bool)
    rows = np.arange(plant.values.count)
    final = marched.out[:, at.OUT_TIME]
    state = np.nan_to_num(marched.at_last, nan=300.0)
    nz = plant.program.structure.sources.shape[0]
    block = plant.blocks[rows, segment_at(plant, rows, final)]
    moles = states.amounts(plant, state, final)
    volume = plant.brought.volume + (plant.brought.feed_volume * plant.brought.share(final)).sum(axis=1)
    net = rates.flow(plant, block, plant.constants[:, at.DELTA], moles, state[:, nz], volume).rate
    forward = rates.flow(plant, block, plant.constants[:, at.DELTA], moles, state[:, nz], volume, forward_only=True).rate
    return np.asarray((np.abs(net[:, reversible]) < _BALANCED * np.abs(forward[:, reversible])).all(axis=1))
