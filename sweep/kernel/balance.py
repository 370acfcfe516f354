"""Mole and energy balances of LANES batches at once: the right-hand side.

States: z (extents or amounts), temperature T, jacket temperature, controller integral, energy over the boundary and from
reaction on the common reference scale. `s` is the table of integers, `f` of floats, `w` the scratch memory, `y` the address of
a state. Equations: the project's DEVELOPERS.md, section Equations.
"""

from sweep.kernel import layout as at
from sweep.kernel.functions import exp, log
from sweep.kernel.memory import coefficient, entry, load, row, store
from sweep.kernel.vector import compiled, size, spread, where

BAND = 1e-3  # width, in opening, over which the controller's integral freezes beyond its ends
REFERENCE = 298.15  # K; the common reference of the energy balance's check


@compiled
def composition(s, f, w, y, time):  # type: ignore[no-untyped-def]
    """Write the amounts n (mol) and concentrations c (mol/m3) that belong to the state y at a time; return the volume (m3)."""
    block, n, c = row(s, w, at.W_BLOCK), row(s, w, at.W_N), row(s, w, at.W_C)
    elapsed = time - load(block, at.T_START)
    volume = load(block, at.VOLUME) + load(block, at.VOLUME_RATE) * elapsed
    inverse = 1.0 / volume
    feed, base, p = entry(s, at.BLOCK_FEED), entry(s, at.BLOCK_BASE), entry(s, at.AT_AMOUNTS)
    for i in range(entry(s, at.N_SPECIES)):
        amount = load(block, base + i) + load(block, feed + i) * elapsed
        end = p + 1 + entry(s, p)
        for q in range(p + 1, end):
            amount = amount + coefficient(f, q) * load(y, entry(s, q))
        p = end
        store(n, i, amount)
        store(c, i, amount * inverse)
    return volume


@compiled
def rate_constant(s, block, terms, T, inverse_T, log_T):  # type: ignore[no-untyped-def]
    """Return ln k of the term whose coefficients begin at block[terms]: A + B/T, and of six also C ln T + D T + E T^2 + F T^3."""
    value = load(block, terms) + load(block, terms + 1) * inverse_T
    if entry(s, at.RATE_TERMS) == 6:
        poly = load(block, terms + 3) + T * (load(block, terms + 4) + T * load(block, terms + 5))
        value = value + load(block, terms + 2) * log_T + T * poly
    return value


@compiled
def fractional(s, f, c, p, count, delta):  # type: ignore[no-untyped-def]
    """Return the logarithm of the factors (|c| + delta)^extra of a term whose factors begin at p."""
    total = spread(0.0)
    for q in range(p, p + 3 * count, 3):
        total = total + coefficient(f, q + 1) * log(size(load(c, entry(s, q))) + delta)
    return total


@compiled
def rates(s, f, w, T, volume):  # type: ignore[no-untyped-def]
    """Write V r_j (mol/s) of each reaction; a term is continued oddly: minus its size where any concentration is negative."""
    block, c, result = row(s, w, at.W_BLOCK), row(s, w, at.W_C), row(s, w, at.W_R)
    inverse_T, log_T = 1.0 / T, T
    if entry(s, at.RATE_TERMS) == 6:
        log_T = log(where(T > 1.0, T, 1.0))
    delta = load(row(s, w, at.W_LANE), at.L_DELTA)
    terms, p = entry(s, at.BLOCK_RATE), entry(s, at.AT_REACTIONS)
    for j in range(entry(s, at.N_REACTIONS)):
        total = spread(0.0)
        directions = entry(s, p)
        p += 1
        for _ in range(directions):
            count, sign, logs = entry(s, p), coefficient(f, p), entry(s, p + 1)
            p += 2
            log_k = rate_constant(s, block, terms, T, inverse_T, log_T)
            if logs == 1:
                log_k = log_k + fractional(s, f, c, p, count, delta)
            rate, least = exp(log_k), spread(1.0)
            end = p + 3 * count
            for q in range(p, end, 3):
                x = load(c, entry(s, q))
                least = where(x < least, x, least)
                rate = rate * x
                for _more in range(1, entry(s, q + 1)):
                    rate = rate * x
            p = end
            total = total + sign * where(least < 0.0, -size(rate), rate)
            terms += entry(s, at.RATE_TERMS)
        store(result, j, total * volume)


@compiled
def polynomial(block, first, terms, T):  # type: ignore[no-untyped-def]
    """Return the polynomial in T whose coefficients begin at block[first], lowest power first."""
    value = load(block, first + terms - 1)
    for k in range(first + terms - 2, first - 1, -1):
        value = value * T + load(block, k)
    return value


@compiled
def feed_heat(block, T):  # type: ignore[no-untyped-def]
    """Return the heat (W) that the feeds take up on their way to T."""
    a, b, c, d = load(block, at.FEED_CP), load(block, at.FEED_CP + 1), load(block, at.FEED_CP + 2), load(block, at.FEED_CP + 3)
    return T * (a + T * (b * 0.5 + T * (c * (1.0 / 3.0) + T * (d * 0.25)))) - load(block, at.FEED_HEAT)


@compiled
def opening(block, T, integral):  # type: ignore[no-untyped-def]
    """Return the valve's opening before it is clipped to 0 to 1."""
    error = T - load(block, at.SET_POINT)
    return load(block, at.OPENING) + load(block, at.GAIN) * (error + integral * load(block, at.RESET_INVERSE))


@compiled
def beyond(u):  # type: ignore[no-untyped-def]
    """Return how far an opening is outside 0 to 1, in widths of the band over which the controller's integral freezes."""
    return where(u > 1.0, u - 1.0, where(u < 0.0, -u, 0.0)) * (1.0 / BAND)


@compiled
def heat_capacity(s, w, T):  # type: ignore[no-untyped-def]
    """Write the species' heat capacities (J/mol/K); return that of the contents and the wall (J/K)."""
    block, n, result = row(s, w, at.W_BLOCK), row(s, w, at.W_N), row(s, w, at.W_CP)
    terms, first = entry(s, at.CP_TERMS), entry(s, at.BLOCK_CP)
    total = load(block, at.WALL)
    for i in range(entry(s, at.N_SPECIES)):
        value = polynomial(block, first + i * terms, terms, T)
        store(result, i, value)
        total = total + value * load(n, i)
    return total


@compiled
def reaction_heat(s, w, T):  # type: ignore[no-untyped-def]
    """Write each reaction's heat at T (J/mol); return the heat given off (W), and what it would be at the common reference (W)."""
    block, heats, r, reference = row(s, w, at.W_BLOCK), row(s, w, at.W_HEAT), row(s, w, at.W_R), row(s, w, at.W_REFERENCE)
    terms, first = entry(s, at.HEAT_TERMS), entry(s, at.BLOCK_HEAT)
    total, at_reference = spread(0.0), spread(0.0)
    for j in range(entry(s, at.N_REACTIONS)):
        heat, rate = polynomial(block, first + j * terms, terms, T), load(r, j)
        store(heats, j, heat)
        total = total - heat * rate
        at_reference = at_reference - load(reference, j) * rate
    return total, at_reference


@compiled
def temperature_slope(s, block, T, through_wall, gained, capacity):  # type: ignore[no-untyped-def]
    """Return dT/dt (K/s) and the cooling duty (W), as the segment's kind of cooling has it."""
    free = load(block, at.FREE)
    inverse = 1.0 / capacity
    slope = (gained - through_wall) * inverse
    duty = where(free > 0.5, through_wall, gained)
    if entry(s, at.HAS_DUTY) == 1:
        on, off = load(block, at.DUTY_ON) > 0.5, gained * inverse
        full = off - load(block, at.DUTY) * inverse
        hold = (load(block, at.SET_POINT) - T) * load(block, at.HOLD_RATE)
        held = where(hold > off, off, where(hold < full, full, hold))
        slope = where(on, held, slope)
        duty = where(on, gained - capacity * held, duty)
    return slope * free, duty


@compiled
def balances(s, f, w, y, T, volume, result):  # type: ignore[no-untyped-def]
    """Write dy/dt from the rates that stand in scratch memory; note heat release, duty (W), dT/dt; return capacity (J/K), gain (W)."""
    block, r, lanes = row(s, w, at.W_BLOCK), row(s, w, at.W_R), row(s, w, at.W_LANE)
    nz, p = entry(s, at.N_STATES), entry(s, at.AT_SOURCES)
    for k in range(nz):
        total = spread(0.0)
        end = p + 1 + entry(s, p)
        for q in range(p + 1, end):
            total = total + coefficient(f, q) * load(r, entry(s, q))
        p = end
        store(result, k, total)
    capacity = heat_capacity(s, w, T)
    heat, at_reference = reaction_heat(s, w, T)
    jacket, integral = load(y, nz + 1), load(y, nz + 2)
    through_wall = (load(block, at.UA_CONSTANT) + load(block, at.UA_PER_VOLUME) * volume) * (T - jacket)
    others = load(block, at.STIRRER) - load(block, at.LOSS) * (T - load(block, at.AMBIENT))
    gained = heat + others - feed_heat(block, T)
    slope, duty = temperature_slope(s, block, T, through_wall, gained, capacity)
    store(result, nz, slope)
    u = opening(block, T, integral)
    renewal = load(block, at.JACKET_RENEWAL) * where(u > 1.0, 1.0, where(u < 0.0, 0.0, u))
    store(result, nz + 1, renewal * (load(block, at.INLET) - jacket) + load(block, at.JACKET_CAPACITY_INVERSE) * through_wall)
    share = 1.0 - beyond(u)
    moving = where(share > 0.0, share, 0.0) * (T - load(block, at.SET_POINT))
    store(result, nz + 2, where(load(block, at.RESET_INVERSE) > 0.0, moving, 0.0))
    store(result, nz + 3, others - duty + at_reference + load(lanes, at.L_BROUGHT))
    store(lanes, at.L_HEAT_NOW, heat)
    store(lanes, at.L_DUTY_NOW, duty)
    store(lanes, at.L_RATE_NOW, slope)
    return capacity, gained


@compiled
def right_side(s, f, w, y, time, result):  # type: ignore[no-untyped-def]
    """Write dy/dt at a state and time."""
    volume = composition(s, f, w, y, time)
    T = load(y, entry(s, at.N_STATES))
    rates(s, f, w, T, volume)
    balances(s, f, w, y, T, volume, result)
