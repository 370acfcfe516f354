"""What a state of the kernel means: amounts, conversion, enthalpy, accumulation; for N points, or N points at K times."""

from collections.abc import Iterable, Mapping

import numpy as np

from sweep.plant.recipe import Charged
from sweep.plant.values import Floats
from sweep.study.model import Study

REFERENCE = 298.15  # K; the common reference of the energy balance's check


def amounts(plant: Charged, state: Floats, time: Floats) -> Floats:
    """Return moles (N, I) of states (N, R) at times (N,)."""
    return amounts_at(plant, np.arange(time.size), state[:, None, :], time[:, None])[:, 0, :]


def enthalpy(plant: Charged, moles: Floats, T: Floats) -> Floats:
    """Return the sensible enthalpy (J) of contents and wall above the common reference, (N,)."""
    powers = np.arange(1, 5)
    rise = (T[:, None] ** powers - REFERENCE**powers) / powers
    per_mole = np.einsum("nik,nk->ni", plant.cp, rise)
    contents: Floats = (moles * per_mole).sum(axis=1)
    return contents + plant.values.get("vessel.heat_capacity") * (T - REFERENCE)


def reference_heats(study: Study, plant: Charged) -> Floats:
    """Return heat given off per mole of each reaction at its own reference temperature (J/mol), (N, reactions)."""
    return np.stack([-plant.values.get(f"reactions.{r.name}.heat.value") for r in study.reactions], axis=1)


def complete(study: Study, moles: Floats, given_off: Floats, purpose: str = "synthesis") -> Floats:
    """Return the heat (J) that completion of all reactions of a purpose would still release, from moles (N, I); see `completed`."""
    return completed(study, {i: moles[:, i] for i in consumed(study, purpose)}, given_off, purpose)[0]


def consumed(study: Study, purpose: str = "synthesis") -> list[int]:
    """Return the species that reactions of a purpose use up: on these alone the heat of completion depends."""
    used = {s for r in study.reactions if r.purpose == purpose for s, n in r.stoichiometry.items() if n < 0.0}
    return [i for i, s in enumerate(study.species) if s.name in used]


def completed(
    study: Study, moles: Mapping[int, Floats], given_off: Floats, purpose: str = "synthesis"
) -> tuple[Floats, dict[int, Floats]]:
    """Return heat (J) and moles after completion, from moles of species (N,) or (N, K) and heats given off (N, reactions), J/mol.

    Species that are not given are left out; what reactions of the purpose use up must be there.

    Reactions of the purpose in order of falling heat given off (per point), each until a reactant is gone, repeated until none moves;
    reversible ones as irreversible.
    """
    names = {s.name: i for i, s in enumerate(study.species)}
    chosen = [j for j, r in enumerate(study.reactions) if r.purpose == purpose]
    shape = next(iter(moles.values())).shape if moles else given_off.shape[:1]
    if not chosen or not moles or 0 in shape:
        return np.zeros(shape), {i: np.maximum(n, 0.0) for i, n in moles.items()}
    nu = np.zeros((len(study.reactions), len(names)))
    for j, reaction in enumerate(study.reactions):
        for s, n in reaction.stoichiometry.items():
            nu[j, names[s]] = n
    order = np.array(chosen)[np.argsort(-given_off[:, chosen], axis=1, kind="stable")]
    if (order == order[0]).all():
        return _in_order(order[0], nu, moles, given_off)
    heat, left = np.empty(shape), {i: np.empty(shape) for i in moles}
    for ranks in np.unique(order, axis=0):
        here = (order == ranks).all(axis=1)
        heat[here], some = _in_order(ranks, nu, {i: n[here] for i, n in moles.items()}, given_off[here])
        for i, part in some.items():
            left[i][here] = part
    return heat, left


def _in_order(ranks: np.ndarray, nu: Floats, moles: Mapping[int, Floats], given_off: Floats) -> tuple[Floats, dict[int, Floats]]:
    """Run the reactions `ranks` one after another, each until a reactant is gone, until none moves; return heat and moles."""
    left = {i: np.maximum(n, 0.0) for i, n in moles.items()}
    heat = np.zeros(next(iter(left.values())).shape)
    passes = 4 * ranks.size + 1 if _feeds_back(ranks, nu) else 1
    scale = 1e-12 * sum(left.values()) if passes > 1 else heat
    moved = np.ones(heat.shape, dtype=bool)
    for _ in range(passes):
        moving, moved = moved, np.zeros(heat.shape, dtype=bool)
        for j in ranks:
            used = np.flatnonzero(nu[j] < 0.0)
            if not used.size:
                continue
            extent = left[used[0]] / -nu[j, used[0]]
            for i in used[1:]:
                extent = np.minimum(extent, left[i] / -nu[j, i])
            if passes > 1:
                extent = np.where(moving, extent, 0.0)  # what is settled keeps its bits, whatever its neighbours do
                moved |= extent > scale
            for i in left.keys() & set(np.flatnonzero(nu[j]).tolist()):
                left[i] = np.maximum(left[i] + extent * nu[j, i], 0.0)
            heat += extent * (given_off[:, j] if heat.ndim == 1 else given_off[:, j, None])
        if not moved.any():
            break
    return heat, left


def _feeds_back(ranks: np.ndarray, nu: Floats) -> bool:
    """Tell whether a reaction makes a reactant of one that ran before it, or of itself: then one pass is not enough."""
    return any(((nu[after] > 0.0) & (nu[before] < 0.0)).any() for k, after in enumerate(ranks) for before in ranks[: k + 1])


def accumulation(study: Study, plant: Charged, rows: np.ndarray, state: Floats, time: Floats) -> Floats:
    """Return the heat still to come over the heat of the whole batch, (M, K), of points `rows` (M,); NaN where that is not positive."""
    given_off = reference_heats(study, plant)[rows]
    whole = complete(study, plant.brought.total()[rows], given_off)
    left, _ = completed(study, amounts_of(plant, rows, state, time, consumed(study)), given_off)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(whole[:, None] > 0.0, left / whole[:, None], np.nan)


def share_at(plant: Charged, rows: np.ndarray, time: Floats) -> Floats:
    """Return which share of each feed is in at times (M, K) of points `rows`: (M, F, K)."""
    return plant.brought.share_of(rows, time)


def amounts_of(
    plant: Charged, rows: np.ndarray, state: Floats, time: Floats, species: Iterable[int] | None = None
) -> dict[int, Floats]:
    """Return moles (M, K) of some species, or of all, in states (M, K, R) at times (M, K) of points `rows` (M,)."""
    share, fed, made = share_at(plant, rows, time), plant.brought.fed[rows], plant.program.structure.amounts
    z = [np.ascontiguousarray(state[:, :, k]) for k in range(made.shape[1])]
    moles = {}
    for i in range(made.shape[0]) if species is None else species:
        total = np.zeros(time.shape)
        for k in np.flatnonzero(made[i]):
            total += z[k] * made[i, k]
        for f in np.flatnonzero(fed[:, :, i].any(axis=0)):
            total += share[:, f] * fed[:, f, i, None]
        if plant.extents:
            total += plant.brought.charged[rows, i, None]
        moles[i] = total
    return moles


def amounts_at(plant: Charged, rows: np.ndarray, state: Floats, time: Floats) -> Floats:
    """Return moles (M, K, I) of states (M, K, R) at times (M, K) of points `rows` (M,)."""
    return np.stack(list(amounts_of(plant, rows, state, time).values()), axis=-1)
