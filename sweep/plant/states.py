"""What a state of the kernel means: amounts, conversion, enthalpy, accumulation; for N points, or N points at K times."""

import numpy as np

from sweep.plant.recipe import Charged
from sweep.plant.values import Floats
from sweep.study.model import Study

REFERENCE = 298.15  # K; the common reference of the energy balance's check


def amounts(plant: Charged, state: Floats, time: Floats) -> Floats:
    """Return moles (N, I) or (N, K, I) of states (N, R) at times (N,), or (N, K, R) at (N, K)."""
    structure = plant.program.structure
    nz = structure.sources.shape[0]
    share = plant.brought.share(time)
    letters = "nf,nfi->ni" if time.ndim == 1 else "nfk,nfi->nki"
    fed = np.einsum(letters, share, plant.brought.fed)
    base = plant.brought.charged if plant.extents else np.zeros_like(plant.brought.charged)
    return fed + (base if time.ndim == 1 else base[:, None, :]) + state[..., :nz] @ structure.amounts.T


def enthalpy(plant: Charged, moles: Floats, T: Floats) -> Floats:
    """Return the sensible enthalpy (J) of contents and wall above the common reference, (N,)."""
    powers = np.arange(1, 5)
    rise = (T[:, None] ** powers - REFERENCE**powers) / powers
    per_mole = np.einsum("nik,nk->ni", plant.cp, rise)
    return (moles * per_mole).sum(axis=1) + plant.values.get("vessel.heat_capacity") * (T - REFERENCE)


def reference_heats(study: Study, plant: Charged) -> Floats:
    """Return heat given off per mole of each reaction at its own reference temperature (J/mol), (N, reactions)."""
    return np.stack([-plant.values.get(f"reactions.{r.name}.heat.value") for r in study.reactions], axis=1)


def complete_synthesis(study: Study, moles: Floats, given_off: Floats) -> Floats:
    """Return the heat (J) that complete synthesis would still release from moles (..., I), heats (N, reactions) broadcast.

    Synthesis reactions in order of falling heat given off, each until a reactant is gone, repeated until none moves.
    """
    names = {s.name: i for i, s in enumerate(study.species)}
    synthesis = [j for j, r in enumerate(study.reactions) if r.purpose == "synthesis"]
    order = sorted(synthesis, key=lambda j: -float(given_off[:, j].mean()))
    left = np.maximum(moles, 0.0)
    heat = np.zeros(moles.shape[:-1])
    weights = given_off if moles.ndim == 2 else given_off[:, None, :]
    scale = float(left.sum(axis=-1).max(initial=1e-300))
    for _ in range(4 * len(synthesis) + 1):
        moved = 0.0
        for j in order:
            nu = np.zeros(len(names))
            for s, n in study.reactions[j].stoichiometry.items():
                nu[names[s]] = n
            used = np.flatnonzero(nu < 0.0)
            if not used.size:
                continue
            extent = (left[..., used] / -nu[used]).min(axis=-1)
            left = np.maximum(left + extent[..., None] * nu, 0.0)
            heat += extent * weights[..., j]
            moved = max(moved, float(extent.max(initial=0.0)))
        if moved <= 1e-12 * scale:
            break
    return heat


def accumulation(study: Study, plant: Charged, state: Floats, time: Floats) -> Floats:
    """Return the heat still to come over the heat of the whole batch, (N, K); NaN where the whole is not positive."""
    given_off = reference_heats(study, plant)
    whole = complete_synthesis(study, plant.brought.total(), given_off)
    left = complete_synthesis(study, amounts(plant, state, time), given_off)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(whole[:, None] > 0.0, left / whole[:, None], np.nan)
