"""Mole and energy balances of LANES batches at once: the right-hand side, and its exact derivatives.

States: z (extents or amounts), temperature T, jacket temperature, controller integral, energy over the boundary and from
reaction on the common reference scale. Addresses are in bytes; `s` is the table of integers, `f` of floats, `w` the scratch.
Equations: the project's DEVELOPERS.md, section Equations.
"""

from sweep.kernel import layout as at
from sweep.kernel.functions import exp, log
from sweep.kernel.vector import STRIDE, compiled, integer, load, number, size, spread, store, where

(
    N_SPECIES, N_STATES, N_REACTIONS, N_ROWS, AT_REACTIONS, AT_SOURCES, AT_AMOUNTS, AT_SLOTS, HEAT_TERMS, CP_TERMS, RATE_TERMS,
    BLOCK_FEED, BLOCK_BASE, BLOCK_RATE, BLOCK_HEAT, BLOCK_CP, W_BLOCK, W_N, W_C, W_CP, W_R, W_R_T, W_R_TIME, W_HEAT, W_D,
    W_SLOTS, W_SLOPE, W_LANE, HAS_DUTY, N_SLOTS,
) = (
    at.N_SPECIES, at.N_STATES, at.N_REACTIONS, at.N_ROWS, at.AT_REACTIONS, at.AT_SOURCES, at.AT_AMOUNTS, at.AT_SLOTS, at.HEAT_TERMS,
    at.CP_TERMS, at.RATE_TERMS, at.BLOCK_FEED, at.BLOCK_BASE, at.BLOCK_RATE, at.BLOCK_HEAT, at.BLOCK_CP, at.W_BLOCK, at.W_N, at.W_C,
    at.W_CP, at.W_R, at.W_R_T, at.W_R_TIME, at.W_HEAT, at.W_D, at.W_SLOTS, at.W_SLOPE, at.W_LANE, at.HAS_DUTY, at.N_SLOTS,
)  # fmt: skip
(T_START, VOLUME, VOLUME_RATE, UA_CONSTANT, UA_PER_VOLUME, FREE, DUTY_ON, DUTY, SET_POINT, HOLD_RATE) = (
    at.T_START, at.VOLUME, at.VOLUME_RATE, at.UA_CONSTANT, at.UA_PER_VOLUME, at.FREE, at.DUTY_ON, at.DUTY, at.SET_POINT, at.HOLD_RATE,
)  # fmt: skip
(JACKET_CAPACITY_INVERSE, JACKET_RENEWAL, INLET, GAIN, RESET_INVERSE, OPENING, WALL, STIRRER, LOSS, AMBIENT, FEED_CP, FEED_HEAT) = (
    at.JACKET_CAPACITY_INVERSE, at.JACKET_RENEWAL, at.INLET, at.GAIN, at.RESET_INVERSE, at.OPENING, at.WALL, at.STIRRER, at.LOSS,
    at.AMBIENT, at.FEED_CP, at.FEED_HEAT,
)  # fmt: skip
(L_HEAT_NOW, L_DUTY_NOW, L_DELTA, L_ABS_HEAT, L_ABS_BOUNDARY, L_HEAT_SLOPE, L_DUTY_SLOPE) = (
    at.L_HEAT_NOW, at.L_DUTY_NOW, at.L_DELTA, at.L_ABS_HEAT, at.L_ABS_BOUNDARY, at.L_HEAT_SLOPE, at.L_DUTY_SLOPE,
)  # fmt: skip

_BAND = 1e-3  # width, in opening, over which the controller's integral freezes beyond its ends
_REFERENCE = 298.15  # K; the common reference of the energy balance's check


@compiled
def row(s, w, name):  # type: ignore[no-untyped-def]
    """Return the address of an array in scratch memory."""
    return w + integer(s + 8 * name) * STRIDE


@compiled
def composition(s, f, w, y, time):  # type: ignore[no-untyped-def]
    """Write the amounts n (mol) and concentrations c (mol/m3) that belong to the state y at a time; return the volume (m3)."""
    block, n, c = row(s, w, W_BLOCK), row(s, w, W_N), row(s, w, W_C)
    elapsed = time - load(block + T_START * STRIDE)
    volume = load(block + VOLUME * STRIDE) + load(block + VOLUME_RATE * STRIDE) * elapsed
    inverse = 1.0 / volume
    feed, base = block + integer(s + 8 * BLOCK_FEED) * STRIDE, block + integer(s + 8 * BLOCK_BASE) * STRIDE
    p = integer(s + 8 * AT_AMOUNTS)
    for i in range(integer(s + 8 * N_SPECIES)):
        amount = load(base + i * STRIDE) + load(feed + i * STRIDE) * elapsed
        count = integer(s + 8 * p)
        p += 1
        for _ in range(count):
            amount = amount + number(f + 8 * p) * load(y + integer(s + 8 * p) * STRIDE)
            p += 1
        store(n + i * STRIDE, amount)
        store(c + i * STRIDE, amount * inverse)
    return volume


@compiled
def rate_constant(s, terms, T, inverse_T, log_T):  # type: ignore[no-untyped-def]
    """Return ln k of a term: A + B/T, and for six coefficients + C ln T + D T + E T^2 + F T^3."""
    value = load(terms) + load(terms + STRIDE) * inverse_T
    if integer(s + 8 * RATE_TERMS) == 6:
        poly = load(terms + 3 * STRIDE) + T * (load(terms + 4 * STRIDE) + T * load(terms + 5 * STRIDE))
        value = value + load(terms + 2 * STRIDE) * log_T + T * poly
    return value


@compiled
def rate_constant_slope(s, terms, T, inverse_T):  # type: ignore[no-untyped-def]
    """Return d ln k / dT of a term."""
    value = -load(terms + STRIDE) * inverse_T * inverse_T
    if integer(s + 8 * RATE_TERMS) == 6:
        poly = load(terms + 3 * STRIDE) + T * (2.0 * load(terms + 4 * STRIDE) + 3.0 * T * load(terms + 5 * STRIDE))
        value = value + load(terms + 2 * STRIDE) * inverse_T + poly
    return value


@compiled
def term_rate(s, f, w, p, count, logs, log_k):  # type: ignore[no-untyped-def]
    """Return a term's rate (mol/m3/s), continued oddly: minus its size where any concentration is negative."""
    c, delta = row(s, w, W_C), load(row(s, w, W_LANE) + L_DELTA * STRIDE)
    if logs == 1:
        for m in range(count):
            q = p + 2 * m
            log_k = log_k + number(f + 8 * (q + 1)) * log(size(load(c + integer(s + 8 * q) * STRIDE)) + delta)
    rate = exp(log_k)
    lowest = spread(1.0)
    for m in range(count):
        q = p + 2 * m
        x = load(c + integer(s + 8 * q) * STRIDE)
        lowest = where(x < lowest, x, lowest)
        for _ in range(integer(s + 8 * (q + 1))):
            rate = rate * x
    return where(lowest < 0.0, -size(rate), rate)


@compiled
def rates(s, f, w, T, volume):  # type: ignore[no-untyped-def]
    """Write V r_j (mol/s) of each reaction."""
    inverse_T = 1.0 / T
    log_T = T
    if integer(s + 8 * RATE_TERMS) == 6:
        log_T = log(where(T > 1.0, T, 1.0))
    terms = row(s, w, W_BLOCK) + integer(s + 8 * BLOCK_RATE) * STRIDE
    result, p = row(s, w, W_R), integer(s + 8 * AT_REACTIONS)
    for j in range(integer(s + 8 * N_REACTIONS)):
        total = spread(0.0)
        directions = integer(s + 8 * p)
        p += 1
        for _ in range(directions):
            count, sign, logs = integer(s + 8 * p), number(f + 8 * p), integer(s + 8 * (p + 1))
            p += 2
            log_k = rate_constant(s, terms, T, inverse_T, log_T)
            total = total + sign * term_rate(s, f, w, p, count, logs, log_k)
            p += 2 * count
            terms += integer(s + 8 * RATE_TERMS) * STRIDE
        store(result + j * STRIDE, total * volume)


@compiled
def polynomial(address, terms, T):  # type: ignore[no-untyped-def]
    """Return the polynomial in T whose coefficients stand at an address, lowest power first."""
    value = load(address + (terms - 1) * STRIDE)
    for k in range(terms - 2, -1, -1):
        value = value * T + load(address + k * STRIDE)
    return value


@compiled
def polynomial_slope(address, terms, T):  # type: ignore[no-untyped-def]
    """Return the derivative of that polynomial."""
    value = spread(0.0)
    for k in range(terms - 1, 0, -1):
        value = value * T + (1.0 * k) * load(address + k * STRIDE)
    return value


@compiled
def feed_heat(block, T):  # type: ignore[no-untyped-def]
    """Return the heat (W) that the feeds take up on their way to T."""
    a, b = load(block + FEED_CP * STRIDE), load(block + (FEED_CP + 1) * STRIDE)
    c, d = load(block + (FEED_CP + 2) * STRIDE), load(block + (FEED_CP + 3) * STRIDE)
    return T * (a + T * (b * 0.5 + T * (c * (1.0 / 3.0) + T * (d * 0.25)))) - load(block + FEED_HEAT * STRIDE)


@compiled
def opening(block, T, integral):  # type: ignore[no-untyped-def]
    """Return the valve's opening before it is clipped to 0 to 1."""
    error = T - load(block + SET_POINT * STRIDE)
    return load(block + OPENING * STRIDE) + load(block + GAIN * STRIDE) * (error + integral * load(block + RESET_INVERSE * STRIDE))


@compiled
def integrating(u):  # type: ignore[no-untyped-def]
    """Return how far the integral moves: 1 inside 0 to 1, falling to 0 within a narrow band outside."""
    outside = where(u > 1.0, u - 1.0, where(u < 0.0, -u, 0.0))
    share = 1.0 - outside * (1.0 / _BAND)
    return where(share > 0.0, share, 0.0)


@compiled
def heat_capacity(s, w, T):  # type: ignore[no-untyped-def]
    """Write the species' heat capacities (J/mol/K); return that of the contents and the wall (J/K)."""
    block, n, result = row(s, w, W_BLOCK), row(s, w, W_N), row(s, w, W_CP)
    terms = integer(s + 8 * CP_TERMS)
    address = block + integer(s + 8 * BLOCK_CP) * STRIDE
    total = load(block + WALL * STRIDE)
    for i in range(integer(s + 8 * N_SPECIES)):
        value = polynomial(address + i * terms * STRIDE, terms, T)
        store(result + i * STRIDE, value)
        total = total + value * load(n + i * STRIDE)
    return total


@compiled
def reaction_heat(s, w, T):  # type: ignore[no-untyped-def]
    """Write each reaction's heat at T (J/mol); return the heat given off (W)."""
    terms = integer(s + 8 * HEAT_TERMS)
    address = row(s, w, W_BLOCK) + integer(s + 8 * BLOCK_HEAT) * STRIDE
    heats, r = row(s, w, W_HEAT), row(s, w, W_R)
    total = spread(0.0)
    for j in range(integer(s + 8 * N_REACTIONS)):
        heat = polynomial(address + j * terms * STRIDE, terms, T)
        store(heats + j * STRIDE, heat)
        total = total - heat * load(r + j * STRIDE)
    return total


@compiled
def energy_terms(s, w, y, T, heat, capacity, volume, result):  # type: ignore[no-untyped-def]
    """Write dT/dt, the jacket's, the integral's and the energy's derivatives; note heat release and cooling duty (W)."""
    block, lane = row(s, w, W_BLOCK), row(s, w, W_LANE)
    nz = integer(s + 8 * N_STATES)
    ua = load(block + UA_CONSTANT * STRIDE) + load(block + UA_PER_VOLUME * STRIDE) * volume
    jacket, integral = load(y + (nz + 1) * STRIDE), load(y + (nz + 2) * STRIDE)
    through_wall = ua * (T - jacket)
    loss = load(block + LOSS * STRIDE) * (T - load(block + AMBIENT * STRIDE))
    others = load(block + STIRRER * STRIDE) - loss
    gained = heat + others - feed_heat(block, T)
    free = load(block + FREE * STRIDE)
    slope = (gained - through_wall) / capacity
    duty = where(free > 0.5, through_wall, gained)
    if integer(s + 8 * HAS_DUTY) == 1:
        on, off = load(block + DUTY_ON * STRIDE), gained / capacity
        full = off - load(block + DUTY * STRIDE) / capacity
        hold = (load(block + SET_POINT * STRIDE) - T) * load(block + HOLD_RATE * STRIDE)
        held = where(hold > off, off, where(hold < full, full, hold))
        slope = where(on > 0.5, held, slope)
        duty = where(on > 0.5, gained - capacity * held, duty)
    slope = slope * free
    store(result + nz * STRIDE, slope)
    u = opening(block, T, integral)
    clipped = where(u > 1.0, 1.0, where(u < 0.0, 0.0, u))
    renewal = load(block + JACKET_RENEWAL * STRIDE) * clipped
    to_jacket = load(block + JACKET_CAPACITY_INVERSE * STRIDE)
    store(result + (nz + 1) * STRIDE, renewal * (load(block + INLET * STRIDE) - jacket) + to_jacket * through_wall)
    error = T - load(block + SET_POINT * STRIDE)
    moving = where(load(block + RESET_INVERSE * STRIDE) > 0.0, integrating(u) * error, 0.0)
    store(result + (nz + 2) * STRIDE, moving)
    store(lane + L_HEAT_NOW * STRIDE, heat)
    store(lane + L_DUTY_NOW * STRIDE, duty)
    return others - duty


@compiled
def right_side(s, f, w, y, time, result):  # type: ignore[no-untyped-def]
    """Write dy/dt at a state and time."""
    volume = composition(s, f, w, y, time)
    nz = integer(s + 8 * N_STATES)
    T = load(y + nz * STRIDE)
    rates(s, f, w, T, volume)
    r, p = row(s, w, W_R), integer(s + 8 * AT_SOURCES)
    for k in range(nz):
        total = spread(0.0)
        count = integer(s + 8 * p)
        p += 1
        for _ in range(count):
            total = total + number(f + 8 * p) * load(r + integer(s + 8 * p) * STRIDE)
            p += 1
        store(result + k * STRIDE, total)
    capacity = heat_capacity(s, w, T)
    heat = reaction_heat(s, w, T)
    boundary = energy_terms(s, w, y, T, heat, capacity, volume, result)
    store(result + (nz + 3) * STRIDE, boundary + reference_heat(s, w) + brought(row(s, w, W_BLOCK)))


@compiled
def reference_heat(s, w):  # type: ignore[no-untyped-def]
    """Return the heat of reaction (W) at the common reference temperature."""
    terms = integer(s + 8 * HEAT_TERMS)
    address, r = row(s, w, W_BLOCK) + integer(s + 8 * BLOCK_HEAT) * STRIDE, row(s, w, W_R)
    total, reference = spread(0.0), spread(_REFERENCE)
    for j in range(integer(s + 8 * N_REACTIONS)):
        total = total - polynomial(address + j * terms * STRIDE, terms, reference) * load(r + j * STRIDE)
    return total


@compiled
def brought(block):  # type: ignore[no-untyped-def]
    """Return the enthalpy (W) that the feeds bring, counted from the common reference temperature."""
    return -feed_heat(block, spread(_REFERENCE))
