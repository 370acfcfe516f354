"""Reactions as numbers: stoichiometry, rate terms, heats and equilibrium as polynomials of temperature, per point.

Arrhenius: ln k = ln k_ref - E_a/R (1/T - 1/T_ref). Kirchhoff: dH(T) = dH_ref + int_Tref^T sum nu c_p dT. Van 't Hoff:
d ln K/dT = dH(T)/(R T^2), integrated exactly for polynomial heat capacities.
"""

import numpy as np

from sweep.kernel.program import Factor, Structure, Term
from sweep.plant.values import Floats, Values
from sweep.study.model import Reaction, Study

R = 8.31446261815324  # J/mol/K, exact (SI 2019: k times N_A)
NO_RATE = -230.0  # ln k of a rate constant of zero: 1e-100, small enough to do nothing, large enough for its products to stay normal numbers


def names(study: Study) -> list[str]:
    """Return the species' names in their order."""
    return [species.name for species in study.species]


def stoichiometry(study: Study) -> Floats:
    """Return nu, shape (species, reactions): moles made per mole of reaction as written."""
    index = {name: i for i, name in enumerate(names(study))}
    nu = np.zeros((len(index), len(study.reactions)))
    for j, reaction in enumerate(study.reactions):
        for name, coefficient in reaction.stoichiometry.items():
            nu[index[name], j] = coefficient
    return nu


def _factor(species: int, order: float, stops: bool) -> Factor | None:
    """Return the factor of a concentration to an order; `stops`: a reactant whose absence ends the reaction."""
    if order == 0.0:
        return Factor(species, 1, -1.0) if stops else None
    power = max(1, int(np.floor(order + 1e-12)))
    extra = order - power
    return Factor(species, power, extra if abs(extra) > 1e-12 else 0.0)


def forward_orders(reaction: Reaction) -> dict[str, float]:
    """Return the order in each species; a reactant that is not named has order zero."""
    return {**dict.fromkeys(reaction.left, 0.0), **reaction.orders}


def _terms(reaction: Reaction, index: dict[str, int]) -> tuple[Term, ...]:
    nu, orders = reaction.stoichiometry, forward_orders(reaction)
    forward = [_factor(index[s], a, nu.get(s, 0.0) < 0.0) for s, a in orders.items()]
    terms = [Term(1.0, tuple(x for x in forward if x))]
    if reaction.reversible:
        back = {s: orders.get(s, 0.0) + nu.get(s, 0.0) for s in {**orders, **nu}}
        backward = [_factor(index[s], a, nu.get(s, 0.0) > 0.0) for s, a in back.items()]
        terms.append(Term(-1.0, tuple(x for x in backward if x)))
    return tuple(terms)


def carries_extents(nu: Floats) -> bool:
    """Tell whether extents can stand for amounts: where reactions are independent no cycle can turn an extent over without end."""
    return nu.shape[1] > 0 and bool(np.linalg.matrix_rank(nu) == nu.shape[1])


def structure_of(study: Study) -> Structure:
    """Return what the kernel must know of a study beside numbers."""
    index = {name: i for i, name in enumerate(names(study))}
    nu = stoichiometry(study)
    species, reactions = nu.shape
    extents = carries_extents(nu)
    sources = np.eye(reactions) if extents else nu
    amounts = nu if extents else np.eye(species)
    if reactions == 0:
        sources, amounts = np.zeros((0, 0)), np.zeros((species, 0))
    target = product = np.zeros(sources.shape[0])
    if study.target is not None:
        target = -amounts[index[study.target.species]]
        if study.target.product is not None:
            product = amounts[index[study.target.product]]
    polynomial = any(s.heat_capacity is not None and any(s.heat_capacity[1:]) for s in study.species)
    reversible = any(r.reversible for r in study.reactions)
    kinds = {study.cooling_kind} | {str(e.sets["cooling.kind"]) for e in study.events if "cooling.kind" in e.sets}
    return Structure(
        reactions=tuple(_terms(r, index) for r in study.reactions),
        sources=sources,
        amounts=amounts,
        target=target,
        product=product,
        heat_terms=5 if polynomial else 2,
        cp_terms=4 if polynomial else 1,
        rate_terms=6 if reversible else 2,
        has_duty="duty" in kinds,
    )


def heat_capacities(study: Study, values: Values) -> Floats:
    """Return c_p coefficients a, b, c, d (J/mol/K, T in K) of each species, shape (N, species, 4); zero where not given."""
    result = np.zeros((values.count, len(study.species), 4))
    for i, species in enumerate(study.species):
        path = f"species.{species.name}.heat_capacity"
        if values.has(path):
            result[:, i, 0] = values.get(path)
        elif species.heat_capacity is not None:
            result[:, i, :] = species.heat_capacity
    return result


def heats(study: Study, values: Values, cp: Floats) -> Floats:
    """Return the coefficients of dH_j(T), lowest power first (J/mol), shape (N, reactions, 5); zero where not given."""
    nu = stoichiometry(study)
    delta = np.einsum("ij,nik->njk", nu, cp)
    result = np.zeros((values.count, len(study.reactions), 5))
    for j, reaction in enumerate(study.reactions):
        path = f"reactions.{reaction.name}.heat"
        if not values.has(f"{path}.value"):
            continue
        at = values.get(f"{path}.at", 298.15)
        result[:, j, 0] = values.get(f"{path}.value")
        for k in range(4):
            result[:, j, k + 1] = delta[:, j, k] / (k + 1)
            result[:, j, 0] -= delta[:, j, k] / (k + 1) * at ** (k + 1)
    return result


def _log(x: Floats) -> Floats:
    """Return ln x, and a number low enough to be no rate at all for zero."""
    return np.where(x > 0.0, np.log(np.where(x > 0.0, x, 1.0)), NO_RATE)


def rate_terms(study: Study, values: Values, heat: Floats, coefficients: int) -> Floats:
    """Return each term's ln k coefficients (A + B/T [+ C ln T + D T + E T^2 + F T^3]), shape (N, terms, coefficients)."""
    columns = []
    for j, reaction in enumerate(study.reactions):
        path = f"reactions.{reaction.name}"
        energy = values.get(f"{path}.rate_constant.activation_energy") / R
        at = values.get(f"{path}.rate_constant.at", 298.15)
        forward = np.zeros((values.count, 6))
        forward[:, 0] = _log(values.need(f"{path}.rate_constant.value")) + energy / at
        forward[:, 1] = -energy
        columns.append(forward)
        if reaction.reversible:
            columns.append(forward - equilibrium(values, path, heat[:, j]))
    if not columns:
        return np.zeros((values.count, 0, coefficients))
    return np.stack(columns, axis=1)[:, :, :coefficients]


def equilibrium(values: Values, path: str, heat: Floats) -> Floats:
    """Return the coefficients of ln K(T), shape (N, 6), from K at its reference temperature and dH(T), shape (N, 5)."""
    at = values.get(f"{path}.equilibrium_constant.at", 298.15)
    a = heat.T / R
    result = np.zeros((values.count, 6))
    result[:, 0] = _log(values.need(f"{path}.equilibrium_constant.value"))
    result[:, 0] += a[0] / at - a[1] * np.log(at) - a[2] * at - a[3] * at**2 / 2 - a[4] * at**3 / 3
    result[:, 1] = -a[0]
    result[:, 2], result[:, 3], result[:, 4], result[:, 5] = a[1], a[2], a[3] / 2, a[4] / 3
    return result
