"""Rates and heats at given states, in NumPy: for profiles, closed forms and checks; the march has its own, compiled.

M states, I species, J reactions. Equations: DEVELOPERS.md.
"""

from dataclasses import dataclass

import numpy as np

from sweep.kernel import layout as at
from sweep.plant.chemistry import R
from sweep.plant.recipe import Charged
from sweep.plant.values import Floats


@dataclass(frozen=True)
class Flow:
    """rate (M, J) mol/s of each reaction; heat (M, J) W given off by each; slope (M, J): d ln(rate of its forward term)/dT, 1/K;
    capacity (M,) J/K of contents and wall; gained (M,) W that the contents take up from all but the cooling."""

    rate: Floats
    heat: Floats
    slope: Floats
    capacity: Floats
    gained: Floats


def _polynomial(coefficients: Floats, T: Floats) -> Floats:
    """Return polynomials (M, X, K), lowest power first, at T (M,): (M, X)."""
    value = np.zeros(coefficients.shape[:2])
    for k in range(coefficients.shape[2] - 1, -1, -1):
        value = value * T[:, None] + coefficients[:, :, k]
    return value


def log_rate_constants(terms: Floats, T: Floats) -> Floats:
    """Return ln k (M, terms) from coefficients (M, terms, 2 or 6)."""
    value = terms[:, :, 0] + terms[:, :, 1] / T[:, None]
    if terms.shape[2] == 6:
        x = T[:, None]
        value = value + terms[:, :, 2] * np.log(x) + x * (terms[:, :, 3] + x * (terms[:, :, 4] + x * terms[:, :, 5]))
    return value


def parts_of_block(plant: Charged, block: Floats) -> tuple[Floats, Floats, Floats]:
    """Return rate terms (M, terms, 2 or 6), heats (M, J, K) and heat capacities (M, I, K) out of segment blocks (M, block)."""
    head, structure = plant.program.integers, plant.program.structure
    m, species = block.shape[0], structure.amounts.shape[0]
    terms = block[:, head[at.BLOCK_RATE] : head[at.BLOCK_HEAT]].reshape(m, sum(map(len, structure.reactions)), structure.rate_terms)
    heats = block[:, head[at.BLOCK_HEAT] : head[at.BLOCK_CP]].reshape(m, len(structure.reactions), structure.heat_terms)
    return terms, heats, block[:, head[at.BLOCK_CP] : head[at.BLOCK_LENGTH]].reshape(m, species, structure.cp_terms)


def flow(
    plant: Charged, block: Floats, delta: Floats, moles: Floats, T: Floats, volume: Floats, forward_only: bool = False
) -> Flow:
    """Return rates and heats at states: block (M, block) of the segment each lies in, delta (M,) mol/m3, moles (M, I), T (M,) K,
    volume (M,) m3; `forward_only` leaves the reverse reactions out."""
    terms, heats, cp = parts_of_block(plant, block)
    c = moles / volume[:, None]
    log_k = log_rate_constants(terms, T)
    rate = np.zeros((T.size, len(plant.program.structure.reactions)))
    slope = np.zeros_like(rate)
    k = 0
    for j, reaction in enumerate(plant.program.structure.reactions):
        for number, term in enumerate(reaction):
            product = np.exp(np.clip(log_k[:, k], -700.0, 700.0))
            negative = np.zeros(T.size, dtype=bool)
            for factor in term.factors:
                x = c[:, factor.species]
                product = product * x**factor.power * (np.abs(x) + delta) ** factor.extra
                negative |= x < 0.0
            if number == 0 or not forward_only:
                rate[:, j] += term.sign * np.where(negative, -np.abs(product), product)
            if number == 0:
                slope[:, j] = -terms[:, k, 1] / T**2
            k += 1
    rate *= volume[:, None]
    heat = -_polynomial(heats, T) * rate
    capacity = (moles * _polynomial(cp, T)).sum(axis=1) + block[:, at.WALL]
    powers = np.arange(1, 5)
    feeds = (block[:, at.FEED_CP : at.FEED_CP + 4] * T[:, None] ** powers / powers).sum(axis=1) - block[:, at.FEED_HEAT]
    gained = heat.sum(axis=1) + block[:, at.STIRRER] - block[:, at.LOSS] * (T - block[:, at.AMBIENT]) - feeds
    return Flow(rate, heat, slope, capacity, gained)


def cooling_duty(block: Floats, now: Flow, T: Floats, jacket: Floats, volume: Floats) -> Floats:
    """Return the heat (W) that the cooling takes away at states, as each segment's kind of cooling has it."""
    through = (block[:, at.UA_CONSTANT] + block[:, at.UA_PER_VOLUME] * volume) * (T - jacket)
    capacity = np.where(now.capacity > 0.0, now.capacity, np.nan)
    off = now.gained / capacity
    full = off - block[:, at.DUTY] / capacity
    hold = (block[:, at.SET_POINT] - T) * block[:, at.HOLD_RATE]
    held = np.where(hold > off, off, np.maximum(full, hold))
    duty = np.where(block[:, at.DUTY_ON] > 0.5, now.gained - now.capacity * held, through)
    return np.where(block[:, at.FREE] > 0.5, duty, now.gained)


def heating_rate(now: Flow) -> Floats:
    """Return dT/dt (K/s) of contents without cooling."""
    return now.gained / np.where(now.capacity > 0.0, now.capacity, np.nan)


def closed_form_tmr(now: Flow, decomposes: list[int], T: Floats) -> Floats:
    """Return c_p R T^2/(q E_a) (s), the usual closed form of the time to maximum rate; infinite without heat.

    q and E_a are of all decomposition reactions together: q E_a = sum q_j E_j. Townsend & Tou, Thermochim. Acta 37 (1980) 1
    (from memory).
    """
    heat = np.maximum(now.heat[:, decomposes], 0.0)
    weighed = (heat * now.slope[:, decomposes]).sum(axis=1) * T**2 * R
    with np.errstate(divide="ignore"):
        return np.where(weighed > 0.0, now.capacity * R * T**2 / np.where(weighed > 0.0, weighed, 1.0), np.inf)
