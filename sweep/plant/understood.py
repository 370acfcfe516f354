"""What a study says, as numbers an engineer can check by hand; nothing is marched. The set-point."""

from dataclasses import dataclass

import numpy as np

from sweep.plant import chemistry
from sweep.plant.charge import Brought, brought_in
from sweep.plant.values import Floats, Values
from sweep.study.model import Study


@dataclass(frozen=True)
class ReactionSeen:
    """extent: the most that what is brought in allows (mol); heat (J/mol as written) at its own reference; rise: adiabatic, if it ran to
    that extent in the whole fill (K); k_start: rate constant at the charge temperature (SI). None where not known."""

    name: str
    equation: str
    purpose: str
    heat: float | None
    extent: float
    rise: float | None
    k_start: float


@dataclass(frozen=True)
class FeedSeen:
    """amount (mol), mass (kg), start and end (s), rate (mol/s), heat: given off if all reacted as it came in (W)."""

    name: str
    amount: float
    mass: float | None
    start: float
    end: float
    rate: float
    heat: float | None


@dataclass(frozen=True)
class Understood:
    """fill: (time s, volume m3) at the recipe's boundaries; ua_start (W/K) and duty_start (W): what the cooling could carry at the start,
    with the jacket at its inlet temperature; capacity (J/K) of the whole fill at the charge temperature."""

    fill: tuple[tuple[float, float], ...]
    reactions: tuple[ReactionSeen, ...]
    feeds: tuple[FeedSeen, ...]
    capacity: float | None
    ua_start: float | None
    duty_start: float | None


def understood(study: Study) -> Understood:
    """Return what a study says about its set-point; SweepError where a quantity that it needs is missing."""
    values = Values(1, study.values)
    brought = brought_in(study, values)
    T = float(values.get("recipe.charge.temperature", 298.15)[0])
    total, cp = brought.total()[0], chemistry.heat_capacities(study, values)[0]
    known = all(s.heat_capacity is not None for s in study.species)
    capacity = float(total @ (cp @ T ** np.arange(4)) + values.get("vessel.heat_capacity")[0]) if known else None
    bare = float(total @ (cp @ T ** np.arange(4))) if known else None
    reactions = tuple(_reaction(study, values, j, total, T, bare) for j in range(len(study.reactions)))
    feeds = tuple(_feed(study, values, brought, f) for f in range(len(study.feeds)))
    ua, duty = _cooling(study, values, brought.volume[0], T)
    return Understood(_fill(brought), reactions, feeds, capacity, ua, duty)


def _fill(brought: Brought) -> tuple[tuple[float, float], ...]:
    times = np.unique(np.concatenate([[0.0], brought.start[0], brought.end[0]]))
    return tuple((float(t), float(brought.volume[0] + (brought.feed_volume * brought.share(np.array([t])))[0].sum())) for t in times)


def _extent(nu: Floats, total: Floats) -> float:
    """Return the extent (mol) at which a reactant is gone; products of other reactions count as nothing."""
    used = np.flatnonzero(nu < 0.0)
    return float((total[used] / -nu[used]).min()) if used.size else 0.0


def _reaction(study: Study, values: Values, j: int, total: Floats, T: float, capacity: float | None) -> ReactionSeen:
    reaction, path = study.reactions[j], f"reactions.{study.reactions[j].name}"
    extent = _extent(chemistry.stoichiometry(study)[:, j], _available(study, total))
    heat = float(values.get(f"{path}.heat.value")[0]) if values.has(f"{path}.heat.value") else None
    rise = -heat * extent / capacity if heat is not None and capacity else None
    at, energy = values.get(f"{path}.rate_constant.at", T)[0], values.get(f"{path}.rate_constant.activation_energy")[0]
    k = float(values.need(f"{path}.rate_constant.value")[0] * np.exp(-energy / chemistry.R * (1.0 / T - 1.0 / at)))
    return ReactionSeen(reaction.name, reaction.equation, reaction.purpose, heat, extent, rise, k)


def _available(study: Study, total: Floats) -> Floats:
    """Return what is brought in, and for what is not, the most that one synthesis reaction could make of it (mol)."""
    nu = chemistry.stoichiometry(study)
    found = total.copy()
    for _ in study.reactions:
        for j, reaction in enumerate(study.reactions):
            if reaction.purpose == "synthesis":
                made = np.maximum(nu[:, j], 0.0) * _extent(nu[:, j], found)
                found = np.maximum(found, np.where(total > 0.0, total, made))
    return found


def _feed(study: Study, values: Values, brought: Brought, f: int) -> FeedSeen:
    feed, fed = study.feeds[f], brought.fed[0, f]
    names = [s.name for s in study.species]
    masses = [values.get(f"species.{n}.molar_mass", np.nan)[0] for n in names]
    mass = float(sum(n * m for n, m in zip(fed, masses, strict=True) if n > 0.0))
    duration = float(brought.end[0, f] - brought.start[0, f])
    heats = [0.0]
    for reaction in study.reactions:
        heat = values.get(f"reactions.{reaction.name}.heat.value")[0]
        heats += [-heat * fed[names.index(s)] / reaction.left[s] for s in feed.species if s in reaction.left and reaction.purpose == "synthesis"]
    known = all(values.has(f"reactions.{r.name}.heat.value") for r in study.reactions)
    amount = float(fed.sum())
    return FeedSeen(
        feed.name, amount, mass if np.isfinite(mass) else None, float(brought.start[0, f]), float(brought.end[0, f]), amount / duration,
        max(heats) / duration if known else None,
    )  # fmt: skip


def _cooling(study: Study, values: Values, volume: float, T: float) -> tuple[float | None, float | None]:
    if study.cooling_kind == "duty":
        return None, float(values.get("cooling.duty")[0])
    if study.cooling_kind not in ("jacket", "coolant"):
        return None, None
    if values.has("vessel.area"):
        area = values.get("vessel.area")[0]
    else:
        bottom = values.get("vessel.area.bottom")[0]
        area = bottom + (values.get("vessel.area.full")[0] - bottom) * volume / values.get("vessel.area.at_volume", 1.0)[0]
    ua = float(values.get("vessel.U")[0] * area)
    cold = values.get("cooling.inlet" if study.cooling_kind == "jacket" else "cooling.temperature", T)[0]
    return ua, float(ua * (T - cold))
