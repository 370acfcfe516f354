"""What a state of the kernel means: amounts, conversion, enthalpy, accumulation; for N points, or N points at K times."""

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
    """Return the heat (J) that completion of all reactions of a purpose would still release; see `completed`."""
    return completed(study, moles, given_off, purpose)[0]


def completed(study: Study, moles: Floats, given_off: Floats, purpose: str = "synthesis") -> tuple[Floats, Floats]:
    """Return heat (J) and moles after completion, from moles (N, I) or (N, K, I) and heats given off (N, reactions), J/mol.

    Reactions of the purpose in order of falling heat given off (per point), each until a reactant is gone, repeated until none moves;
    reversible ones as irreversible.
    """
    names = {s.name: i for i, s in enumerate(study.species)}
    chosen = [j for j, r in enumerate(study.reactions) if r.purpose == purpose]
    left, heat = np.maximum(moles, 0.0), np.zeros(moles.shape[:-1])
    if not chosen:
        return heat, left
    nu = np.zeros((len(study.reactions), len(names)))
    for j, reaction in enumerate(study.reactions):
        for s, n in reaction.stoichiometry.items():
            nu[j, names[s]] = n
    order = np.array(chosen)[np.argsort(-given_off[:, chosen], axis=1, kind="stable")]
    for ranks in np.unique(order, axis=0):
        here = (order == ranks).all(axis=1)
        heat[here], left[here] = _in_order(ranks, nu, left[here], given_off[here])
    return heat, left


def _in_order(ranks: np.ndarray, nu: Floats, left: Floats, given_off: Floats) -> tuple[Floats, Floats]:
    """Run the reactions `ranks` one after another, each until a reactant is gone, until none moves; return heat and moles."""
    heat = np.zeros(left.shape[:-1])
    scale = 1e-12 * left.sum(axis=-1)
    amounts = [np.ascontiguousarray(left[..., i]) for i in range(left.shape[-1])]
    moved = np.ones(left.shape[:-1], dtype=bool)
    for _ in range(4 * ranks.size + 1 if _feeds_back(ranks, nu) else 1):
        moving, moved = moved, np.zeros(left.shape[:-1], dtype=bool)
        for j in ranks:
            used = np.flatnonzero(nu[j] < 0.0)
            if not used.size:
                continue
            extent = amounts[used[0]] / -nu[j, used[0]]
            for i in used[1:]:
                extent = np.minimum(extent, amounts[i] / -nu[j, i])
            extent = np.where(moving, extent, 0.0)  # what is settled keeps its bits, whatever its neighbours do
            for i in np.flatnonzero(nu[j]):
                amounts[i] = np.maximum(amounts[i] + extent * nu[j, i], 0.0)
            heat += extent * (given_off[:, j] if left.ndim == 2 else given_off[:, j, None])
            moved |= extent > scale
        if not moved.any():
            break
    return heat, np.stack(amounts, axis=-1)


def _feeds_back(ranks: np.ndarray, nu: Floats) -> bool:
    """Tell whether a reaction makes a reactant of one that ran before it, or of itself: then one pass is not enough."""
    return any(((nu[after] > 0.0) & (nu[before] < 0.0)).any() for k, after in enumerate(ranks) for before in ranks[: k + 1])


def accumulation(study: Study, plant: Charged, rows: np.ndarray, state: Floats, time: Floats) -> Floats:
    """Return the heat still to come over the heat of the whole batch, (M, K), of points `rows` (M,); NaN where that is not positive."""
    given_off = reference_heats(study, plant)[rows]
    whole = complete(study, plant.brought.total()[rows], given_off)
    left = complete(study, amounts_at(plant, rows, state, time), given_off)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(whole[:, None] > 0.0, left / whole[:, None], np.nan)


def share_at(plant: Charged, rows: np.ndarray, time: Floats) -> Floats:
    """Return which share of each feed is in at times (M, K) of points `rows`: (M, F, K)."""
    return plant.brought.share_of(rows, time)


def amounts_at(plant: Charged, rows: np.ndarray, state: Floats, time: Floats) -> Floats:
    """Return moles (M, K, I) of states (M, K, R) at times (M, K) of points `rows` (M,)."""
    structure = plant.program.structure
    nz = structure.sources.shape[0]
    fed = np.einsum("mfk,mfi->mki", share_at(plant, rows, time), plant.brought.fed[rows])
    base = plant.brought.charged[rows][:, None, :] if plant.extents else 0.0
    moles: Floats = fed + base + state[..., :nz] @ structure.amounts.T
    return moles
