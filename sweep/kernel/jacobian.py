"""Exact derivatives of the balances: the Jacobian into the slots of the sparse LU, and the derivative with time.

Must follow `right_side` at the same state: it reads the amounts, rates, heats and heat capacities that it left.
"""

from sweep.kernel import layout as at
from sweep.kernel.balance import (
    _BAND,
    feed_heat,
    opening,
    polynomial,
    polynomial_slope,
    rate_constant,
    rate_constant_slope,
    row,
)
from sweep.kernel.functions import exp, log
from sweep.kernel.vector import STRIDE, compiled, integer, load, number, size, spread, store, where

(N_SPECIES, N_STATES, N_REACTIONS, N_ROWS, N_SLOTS, AT_REACTIONS, AT_SOURCES, AT_AMOUNTS, AT_SLOTS, HEAT_TERMS, CP_TERMS, RATE_TERMS) = (
    at.N_SPECIES, at.N_STATES, at.N_REACTIONS, at.N_ROWS, at.N_SLOTS, at.AT_REACTIONS, at.AT_SOURCES, at.AT_AMOUNTS, at.AT_SLOTS,
    at.HEAT_TERMS, at.CP_TERMS, at.RATE_TERMS,
)  # fmt: skip
(BLOCK_FEED, BLOCK_RATE, BLOCK_HEAT, BLOCK_CP, W_BLOCK, W_N, W_C, W_CP, W_R, W_R_T, W_R_TIME, W_HEAT, W_D, W_SLOTS, W_SLOPE, W_LANE) = (
    at.BLOCK_FEED, at.BLOCK_RATE, at.BLOCK_HEAT, at.BLOCK_CP, at.W_BLOCK, at.W_N, at.W_C, at.W_CP, at.W_R, at.W_R_T, at.W_R_TIME,
    at.W_HEAT, at.W_D, at.W_SLOTS, at.W_SLOPE, at.W_LANE,
)  # fmt: skip
(VOLUME, VOLUME_RATE, UA_CONSTANT, UA_PER_VOLUME, FREE, DUTY_ON, DUTY, SET_POINT, HOLD_RATE, HAS_DUTY, FEED_CP, LOSS, INLET) = (
    at.VOLUME, at.VOLUME_RATE, at.UA_CONSTANT, at.UA_PER_VOLUME, at.FREE, at.DUTY_ON, at.DUTY, at.SET_POINT, at.HOLD_RATE, at.HAS_DUTY,
    at.FEED_CP, at.LOSS, at.INLET,
)  # fmt: skip
(JACKET_CAPACITY_INVERSE, JACKET_RENEWAL, GAIN, RESET_INVERSE, L_DELTA, L_HEAT_SLOPE, L_DUTY_SLOPE, L_HEAT_NOW, STIRRER, AMBIENT, L_RATE,
    L_RATE_SLOPE) = (
    at.JACKET_CAPACITY_INVERSE, at.JACKET_RENEWAL, at.GAIN, at.RESET_INVERSE, at.L_DELTA, at.L_HEAT_SLOPE, at.L_DUTY_SLOPE,
    at.L_HEAT_NOW, at.STIRRER, at.AMBIENT, at.L_RATE, at.L_RATE_SLOPE,
)  # fmt: skip


@compiled
def factor_slope(f, s, c, p, count, m, k, delta):  # type: ignore[no-untyped-def]
    """Return d(k prod c^power)/dc of factor m, where k holds the rate constant and the fractional parts."""
    q = p + 2 * m
    x, power, extra = load(c + integer(s + 8 * q) * STRIDE), integer(s + 8 * (q + 1)), number(f + 8 * (q + 1))
    slope = k * (1.0 * power)
    if extra != 0.0:
        slope = k * (1.0 * power + extra * size(x) / (size(x) + delta))
    for _ in range(power - 1):
        slope = slope * x
    for other in range(count):
        if other != m:
            q = p + 2 * other
            x = load(c + integer(s + 8 * q) * STRIDE)
            for _ in range(integer(s + 8 * (q + 1))):
                slope = slope * x
    return slope


@compiled
def rate_derivatives(s, f, w, T, volume):  # type: ignore[no-untyped-def]
    """Write d(V r_j)/dT, d(V r_j)/dt and d(V r_j)/dz_l."""
    inverse_T, log_T = 1.0 / T, T
    if integer(s + 8 * RATE_TERMS) == 6:
        log_T = log(where(T > 1.0, T, 1.0))
    block, c, d = row(s, w, W_BLOCK), row(s, w, W_C), row(s, w, W_D)
    feed = block + integer(s + 8 * BLOCK_FEED) * STRIDE
    terms = block + integer(s + 8 * BLOCK_RATE) * STRIDE
    grow, delta = load(block + VOLUME_RATE * STRIDE), load(row(s, w, W_LANE) + L_DELTA * STRIDE)
    nz, p, amounts = integer(s + 8 * N_STATES), integer(s + 8 * AT_REACTIONS), integer(s + 8 * AT_AMOUNTS)
    for j in range(integer(s + 8 * N_REACTIONS)):
        by_T, by_time = spread(0.0), spread(0.0)
        dj = d + j * nz * STRIDE
        for l in range(nz):
            store(dj + l * STRIDE, spread(0.0))
        directions = integer(s + 8 * p)
        p += 1
        for _ in range(directions):
            count, sign, logs = integer(s + 8 * p), number(f + 8 * p), integer(s + 8 * (p + 1))
            p += 2
            log_k = rate_constant(s, terms, T, inverse_T, log_T)
            if logs == 1:
                for m in range(count):
                    q = p + 2 * m
                    log_k = log_k + number(f + 8 * (q + 1)) * log(size(load(c + integer(s + 8 * q) * STRIDE)) + delta)
            k = exp(log_k)
            rate, lowest = k, spread(1.0)
            for m in range(count):
                q = p + 2 * m
                x = load(c + integer(s + 8 * q) * STRIDE)
                lowest = where(x < lowest, x, lowest)
                for _m in range(integer(s + 8 * (q + 1))):
                    rate = rate * x
            odd = where(lowest < 0.0, where(rate > 0.0, -1.0, 1.0), 1.0) * sign
            rate = odd * rate
            by_T = by_T + rate * rate_constant_slope(s, terms, T, inverse_T)
            by_time = by_time + rate * grow
            for m in range(count):
                i = integer(s + 8 * (p + 2 * m))
                slope = odd * factor_slope(f, s, c, p, count, m, k, delta)
                by_time = by_time + slope * (load(feed + i * STRIDE) - load(c + i * STRIDE) * grow)
                a = amounts
                for _i in range(i):
                    a += 1 + integer(s + 8 * a)
                for e in range(integer(s + 8 * a)):
                    target = dj + integer(s + 8 * (a + 1 + e)) * STRIDE
                    store(target, load(target) + slope * number(f + 8 * (a + 1 + e)))
            p += 2 * count
            terms += integer(s + 8 * RATE_TERMS) * STRIDE
        store(row(s, w, W_R_T) + j * STRIDE, by_T * volume)
        store(row(s, w, W_R_TIME) + j * STRIDE, by_time)


@compiled
def slot(s, w, i, j):  # type: ignore[no-untyped-def]
    """Return the address of an entry of the matrix."""
    n = integer(s + 8 * N_ROWS)
    return row(s, w, W_SLOTS) + integer(s + 8 * (integer(s + 8 * AT_SLOTS) + i * n + j)) * STRIDE


@compiled
def chemical_rows(s, f, w):  # type: ignore[no-untyped-def]
    """Write the rows of z: columns z and T, and the derivative with time."""
    nz, p = integer(s + 8 * N_STATES), integer(s + 8 * AT_SOURCES)
    d, by_T, by_time, slope = row(s, w, W_D), row(s, w, W_R_T), row(s, w, W_R_TIME), row(s, w, W_SLOPE)
    slots, n = integer(s + 8 * AT_SLOTS), integer(s + 8 * N_ROWS)
    for k in range(nz):
        count = integer(s + 8 * p)
        p += 1
        at_T, at_time = spread(0.0), spread(0.0)
        for e in range(count):
            j, weight = integer(s + 8 * (p + e)), number(f + 8 * (p + e))
            at_T = at_T + weight * load(by_T + j * STRIDE)
            at_time = at_time + weight * load(by_time + j * STRIDE)
        store(slot(s, w, k, nz), at_T)
        store(slope + k * STRIDE, at_time)
        for l in range(nz):
            if integer(s + 8 * (slots + k * n + l)) >= 0:
                total = spread(0.0)
                for e in range(count):
                    total = total + number(f + 8 * (p + e)) * load(d + (integer(s + 8 * (p + e)) * nz + l) * STRIDE)
                store(slot(s, w, k, l), total)
        p += count


@compiled
def capacity_slope(s, w, T):  # type: ignore[no-untyped-def]
    """Return d(heat capacity)/dT (J/K2) at constant amounts."""
    terms = integer(s + 8 * CP_TERMS)
    total = spread(0.0)
    if terms > 1:
        address = row(s, w, W_BLOCK) + integer(s + 8 * BLOCK_CP) * STRIDE
        for i in range(integer(s + 8 * N_SPECIES)):
            total = total + load(row(s, w, W_N) + i * STRIDE) * polynomial_slope(address + i * terms * STRIDE, terms, T)
    return total


@compiled
def heat_by_state(s, w, l):  # type: ignore[no-untyped-def]
    """Return d(heat given off)/dz_l (W per unit of z)."""
    nz, total = integer(s + 8 * N_STATES), spread(0.0)
    for j in range(integer(s + 8 * N_REACTIONS)):
        total = total - load(row(s, w, W_HEAT) + j * STRIDE) * load(row(s, w, W_D) + (j * nz + l) * STRIDE)
    return total


@compiled
def reference_row(s, w, l):  # type: ignore[no-untyped-def]
    """Return the derivative of the heat of reaction at the common reference temperature: by z_l, or by T where l is -1."""
    nz, terms = integer(s + 8 * N_STATES), integer(s + 8 * HEAT_TERMS)
    address = row(s, w, W_BLOCK) + integer(s + 8 * BLOCK_HEAT) * STRIDE
    total, reference = spread(0.0), spread(298.15)
    for j in range(integer(s + 8 * N_REACTIONS)):
        by = row(s, w, W_R_T) + j * STRIDE
        if l >= 0:
            by = row(s, w, W_D) + (j * nz + l) * STRIDE
        if l == -2:
            by = row(s, w, W_R_TIME) + j * STRIDE
        total = total - polynomial(address + j * terms * STRIDE, terms, reference) * load(by)
    return total


@compiled
def heat_by_temperature(s, w, T):  # type: ignore[no-untyped-def]
    """Return d(heat given off)/dT (W/K)."""
    terms = integer(s + 8 * HEAT_TERMS)
    address = row(s, w, W_BLOCK) + integer(s + 8 * BLOCK_HEAT) * STRIDE
    total = spread(0.0)
    for j in range(integer(s + 8 * N_REACTIONS)):
        total = total - load(row(s, w, W_HEAT) + j * STRIDE) * load(row(s, w, W_R_T) + j * STRIDE)
        total = total - polynomial_slope(address + j * terms * STRIDE, terms, T) * load(row(s, w, W_R) + j * STRIDE)
    return total


@compiled
def heat_by_time(s, w):  # type: ignore[no-untyped-def]
    """Return d(heat given off)/dt at a constant state (W/s)."""
    total = spread(0.0)
    for j in range(integer(s + 8 * N_REACTIONS)):
        total = total - load(row(s, w, W_HEAT) + j * STRIDE) * load(row(s, w, W_R_TIME) + j * STRIDE)
    return total


@compiled
def jacobian(s, f, w, y, slope_now, volume, capacity):  # type: ignore[no-untyped-def]
    """Write the Jacobian into its slots and df/dt beside it; note how heat release and duty (W/s) and dT/dt (K/s2) change."""
    block, lane, slope = row(s, w, W_BLOCK), row(s, w, W_LANE), row(s, w, W_SLOPE)
    nz = integer(s + 8 * N_STATES)
    T, jacket, integral = load(y + nz * STRIDE), load(y + (nz + 1) * STRIDE), load(y + (nz + 2) * STRIDE)
    for k in range(integer(s + 8 * N_SLOTS)):
        store(row(s, w, W_SLOTS) + k * STRIDE, spread(0.0))
    rate_derivatives(s, f, w, T, volume)
    chemical_rows(s, f, w)
    ua_slope = load(block + UA_PER_VOLUME * STRIDE) * load(block + VOLUME_RATE * STRIDE)
    ua = load(block + UA_CONSTANT * STRIDE) + load(block + UA_PER_VOLUME * STRIDE) * volume
    cp_feed = load(block + FEED_CP * STRIDE) + T * (
        load(block + (FEED_CP + 1) * STRIDE) + T * (load(block + (FEED_CP + 2) * STRIDE) + T * load(block + (FEED_CP + 3) * STRIDE))
    )
    free = load(block + FREE * STRIDE)
    heat_T, heat_t = heat_by_temperature(s, w, T), heat_by_time(s, w)
    gained_T = heat_T - load(block + LOSS * STRIDE) - cp_feed
    dT = load(slope_now + nz * STRIDE)
    wall_on, keep, hold, kept = spread(1.0), free, spread(0.0), spread(0.0)
    drift = dT
    if integer(s + 8 * HAS_DUTY) == 1:
        loss = load(block + LOSS * STRIDE) * (T - load(block + AMBIENT * STRIDE))
        off = (load(lane + L_HEAT_NOW * STRIDE) + load(block + STIRRER * STRIDE) - loss - feed_heat(block, T)) / capacity
        held = (load(block + SET_POINT * STRIDE) - T) * load(block + HOLD_RATE * STRIDE)
        on = load(block + DUTY_ON * STRIDE) > 0.5
        holding = on & (held < off) & (held > off - load(block + DUTY * STRIDE) / capacity)
        keep = where(holding, 0.0, free)
        hold = where(holding, -load(block + HOLD_RATE * STRIDE), 0.0)
        wall_on = where(on, 0.0, wall_on)
        kept = where(holding, 1.0, 0.0)
    inverse = keep / capacity
    heat_slope, capacity_T = heat_t + heat_T * dT, capacity_slope(s, w, T)
    for l in range(nz):
        by_z, cp_z = heat_by_state(s, w, l), spread(0.0)
        p = integer(s + 8 * AT_AMOUNTS)
        for i in range(integer(s + 8 * N_SPECIES)):
            count = integer(s + 8 * p)
            p += 1
            for _ in range(count):
                if integer(s + 8 * p) == l:
                    cp_z = cp_z + number(f + 8 * p) * load(row(s, w, W_CP) + i * STRIDE)
                p += 1
        heat_slope = heat_slope + by_z * load(slope_now + l * STRIDE)
        store(slot(s, w, nz, l), (by_z - drift * cp_z) * inverse)
        duty_z = where(free > 0.5, kept * (by_z - drift * cp_z), by_z)
        store(slot(s, w, nz + 3, l), reference_row(s, w, l) - duty_z)
    store(slot(s, w, nz, nz), (gained_T - wall_on * ua - drift * capacity_T) * inverse + hold)
    store(slot(s, w, nz, nz + 1), wall_on * ua * inverse)
    through = ua_slope * (T - jacket)
    store(slope + nz * STRIDE, (heat_t - wall_on * through - drift * cp_feed) * inverse)
    u = opening(block, T, integral)
    inside = where(u > 0.0, where(u < 1.0, 1.0, 0.0), 0.0)
    clipped = where(u > 1.0, 1.0, where(u < 0.0, 0.0, u))
    renewal, cooler = load(block + JACKET_RENEWAL * STRIDE), load(block + INLET * STRIDE) - jacket
    to_jacket, gain = load(block + JACKET_CAPACITY_INVERSE * STRIDE), load(block + GAIN * STRIDE)
    store(slot(s, w, nz + 1, nz), renewal * cooler * gain * inside + to_jacket * ua)
    store(slot(s, w, nz + 1, nz + 1), -renewal * clipped - to_jacket * ua)
    store(slot(s, w, nz + 1, nz + 2), renewal * cooler * gain * load(block + RESET_INVERSE * STRIDE) * inside)
    store(slope + (nz + 1) * STRIDE, to_jacket * through)
    reset = load(block + RESET_INVERSE * STRIDE)
    outside = where(u > 1.0, u - 1.0, where(u < 0.0, -u, 0.0)) * (1.0 / _BAND)
    share = where(outside < 1.0, 1.0 - outside, 0.0)
    side = where(outside < 1.0, where(u > 1.0, -1.0 / _BAND, where(u < 0.0, 1.0 / _BAND, 0.0)), 0.0)
    error, active = T - load(block + SET_POINT * STRIDE), where(reset > 0.0, 1.0, 0.0)
    store(slot(s, w, nz + 2, nz), active * (share + error * side * gain))
    store(slot(s, w, nz + 2, nz + 2), active * error * side * gain * reset)
    store(slope + (nz + 2) * STRIDE, spread(0.0))
    wall_duty = where(free > 0.5, ua * wall_on + kept * (gained_T - drift * capacity_T - capacity * hold), gained_T)
    loss_T = load(block + LOSS * STRIDE)
    store(slot(s, w, nz + 3, nz), reference_row(s, w, -1) - loss_T - wall_duty)
    store(slot(s, w, nz + 3, nz + 1), where(free > 0.5, ua * wall_on, 0.0))
    store(slope + (nz + 3) * STRIDE, reference_row(s, w, -2) - where(free > 0.5, through * wall_on + kept * (heat_t - drift * cp_feed), heat_t))
    store(lane + L_HEAT_SLOPE * STRIDE, heat_slope)
    wall_slope = through + ua * (dT - load(slope_now + (nz + 1) * STRIDE))
    needed = heat_slope - (loss_T + cp_feed) * dT
    pinned = where(wall_on > 0.5, where(free > 0.5, wall_slope, needed), where(hold < 0.0, needed, 0.0))
    store(lane + L_DUTY_SLOPE * STRIDE, pinned)
    heating_slope = load(slope + nz * STRIDE)
    for l in range(nz + 2):
        heating_slope = heating_slope + load(slot(s, w, nz, l)) * load(slope_now + l * STRIDE)
    store(lane + L_RATE * STRIDE, dT)
    store(lane + L_RATE_SLOPE * STRIDE, heating_slope)
