"""Exact derivatives of the balances: the Jacobian into the slots of the sparse LU, and the derivative with time.

One pass at the start of a step: the right-hand side and its derivatives share composition, exponentials, heats and capacities.
"""

from sweep.kernel import layout as at
from sweep.kernel.balance import BAND, balances, beyond, composition, fractional, opening, rate_constant
from sweep.kernel.functions import exp, log
from sweep.kernel.memory import coefficient, entry, load, row, store
from sweep.kernel.vector import compiled, size, spread, where


@compiled
def rate_constant_slope(s, block, terms, T, inverse_T):  # type: ignore[no-untyped-def]
    """Return d ln k / dT of a term."""
    value = -load(block, terms + 1) * inverse_T * inverse_T
    if entry(s, at.RATE_TERMS) == 6:
        poly = load(block, terms + 3) + T * (2.0 * load(block, terms + 4) + 3.0 * T * load(block, terms + 5))
        value = value + load(block, terms + 2) * inverse_T + poly
    return value


@compiled
def factor_slope(s, f, c, p, end, q, k, delta):  # type: ignore[no-untyped-def]
    """Return d(k prod c^power)/dc of the factor at q of those from p to end, where k holds rate constant and fractional parts."""
    x, power, extra = load(c, entry(s, q)), entry(s, q + 1), coefficient(f, q + 1)
    slope = k * (1.0 * power)
    if extra != 0.0:
        slope = k * (1.0 * power + extra * size(x) / (size(x) + delta))
    for _ in range(power - 1):
        slope = slope * x
    for other in range(p, end, 3):
        if other != q:
            x = load(c, entry(s, other))
            for _ in range(entry(s, other + 1)):
                slope = slope * x
    return slope


@compiled
def rates_with_slopes(s, f, w, T, volume):  # type: ignore[no-untyped-def]
    """Write V r_j (mol/s) and its derivatives by T, by time and by z; equal to `rates` in the rates themselves."""
    block, c, d, result = row(s, w, at.W_BLOCK), row(s, w, at.W_C), row(s, w, at.W_D), row(s, w, at.W_R)
    inverse_T, log_T = 1.0 / T, T
    if entry(s, at.RATE_TERMS) == 6:
        log_T = log(where(T > 1.0, T, 1.0))
    grow, delta = load(block, at.VOLUME_RATE), load(row(s, w, at.W_LANE), at.L_DELTA)
    feed, nz = entry(s, at.BLOCK_FEED), entry(s, at.N_STATES)
    terms, p = entry(s, at.BLOCK_RATE), entry(s, at.AT_REACTIONS)
    for j in range(entry(s, at.N_REACTIONS)):
        total, by_T, by_time = spread(0.0), spread(0.0), spread(0.0)
        dj = j * nz
        for l in range(dj, dj + nz):
            store(d, l, 0.0)
        directions = entry(s, p)
        p += 1
        for _ in range(directions):
            count, sign, logs = entry(s, p), coefficient(f, p), entry(s, p + 1)
            p += 2
            log_k = rate_constant(s, block, terms, T, inverse_T, log_T)
            if logs == 1:
                log_k = log_k + fractional(s, f, c, p, count, delta)
            k = exp(log_k)
            rate, least = k, spread(1.0)
            end = p + 3 * count
            for q in range(p, end, 3):
                x = load(c, entry(s, q))
                least = where(x < least, x, least)
                rate = rate * x
                for _more in range(1, entry(s, q + 1)):
                    rate = rate * x
            odd = sign * where(least < 0.0, where(rate > 0.0, -1.0, 1.0), 1.0)
            total = total + odd * rate
            by_T = by_T + odd * rate * rate_constant_slope(s, block, terms, T, inverse_T)
            by_time = by_time + odd * rate * grow
            for q in range(p, end, 3):
                i = entry(s, q)
                slope = odd * factor_slope(s, f, c, p, end, q, k, delta)
                by_time = by_time + slope * (load(block, feed + i) - load(c, i) * grow)
                a = entry(s, q + 2)
                for e in range(a + 1, a + 1 + entry(s, a)):
                    l = dj + entry(s, e)
                    store(d, l, load(d, l) + slope * coefficient(f, e))
            p = end
            terms += entry(s, at.RATE_TERMS)
        store(result, j, total * volume)
        store(row(s, w, at.W_R_T), j, by_T * volume)
        store(row(s, w, at.W_R_TIME), j, by_time)


@compiled
def chemical_rows(s, f, w):  # type: ignore[no-untyped-def]
    """Write the rows of z: columns z and T, and the derivative with time."""
    slots, d, by_T, by_time = row(s, w, at.W_SLOTS), row(s, w, at.W_D), row(s, w, at.W_R_T), row(s, w, at.W_R_TIME)
    p, r = entry(s, at.AT_CHEMICAL), entry(s, at.AT_SOURCES)
    for k in range(entry(s, at.N_STATES)):
        at_T, at_time = spread(0.0), spread(0.0)
        end = r + 1 + entry(s, r)
        for q in range(r + 1, end):
            at_T = at_T + coefficient(f, q) * load(by_T, entry(s, q))
            at_time = at_time + coefficient(f, q) * load(by_time, entry(s, q))
        r = end
        store(slots, entry(s, p), at_T)
        store(row(s, w, at.W_SLOPE), k, at_time)
        columns = entry(s, p + 1)
        p += 2
        for _ in range(columns):
            total, place = spread(0.0), entry(s, p)
            end = p + 2 + entry(s, p + 1)
            for q in range(p + 2, end):
                total = total + coefficient(f, q) * load(d, entry(s, q))
            p = end
            store(slots, place, total)


@compiled
def heat_slopes(s, f, w, T):  # type: ignore[no-untyped-def]
    """Write by z: of capacity (J/K), of heat given off at T and at the reference (W); return the latter two by T and by time, and
    capacity by T (J/K2)."""
    block, d, heats, reference = row(s, w, at.W_BLOCK), row(s, w, at.W_D), row(s, w, at.W_HEAT), row(s, w, at.W_REFERENCE)
    by_z, reference_z, cp_z = row(s, w, at.W_HEAT_Z), row(s, w, at.W_REFERENCE_Z), row(s, w, at.W_CP_Z)
    nz, p = entry(s, at.N_STATES), entry(s, at.AT_COLUMNS)
    for l in range(nz):
        total = spread(0.0)
        end = p + 1 + entry(s, p)
        for q in range(p + 1, end):
            total = total + coefficient(f, q) * load(row(s, w, at.W_CP), entry(s, q))
        p = end
        store(cp_z, l, total)
        store(by_z, l, 0.0)
        store(reference_z, l, 0.0)
    heat_T, heat_t, reference_T, reference_t = spread(0.0), spread(0.0), spread(0.0), spread(0.0)
    terms, first, p = entry(s, at.HEAT_TERMS), entry(s, at.BLOCK_HEAT), entry(s, at.AT_TOUCHED)
    for j in range(entry(s, at.N_REACTIONS)):
        heat, at_reference = load(heats, j), load(reference, j)
        by_T, by_time = load(row(s, w, at.W_R_T), j), load(row(s, w, at.W_R_TIME), j)
        heat_T = heat_T - heat * by_T - polynomial_slope(block, first + j * terms, terms, T) * load(row(s, w, at.W_R), j)
        heat_t = heat_t - heat * by_time
        reference_T, reference_t = reference_T - at_reference * by_T, reference_t - at_reference * by_time
        end = p + 1 + entry(s, p)
        for q in range(p + 1, end):
            l = entry(s, q)
            slope = load(d, j * nz + l)
            store(by_z, l, load(by_z, l) - heat * slope)
            store(reference_z, l, load(reference_z, l) - at_reference * slope)
        p = end
    capacity_T = spread(0.0)
    terms, first = entry(s, at.CP_TERMS), entry(s, at.BLOCK_CP)
    if terms > 1:
        for i in range(entry(s, at.N_SPECIES)):
            capacity_T = capacity_T + load(row(s, w, at.W_N), i) * polynomial_slope(block, first + i * terms, terms, T)
    return heat_T, heat_t, reference_T, reference_t, capacity_T


@compiled
def polynomial_slope(block, first, terms, T):  # type: ignore[no-untyped-def]
    """Return the derivative of the polynomial whose coefficients begin at block[first]."""
    value = spread(0.0)
    for k in range(terms - 1, 0, -1):
        value = value * T + (1.0 * k) * load(block, first + k)
    return value


@compiled
def jacket_rows(s, w, y, T, ua, through_t):  # type: ignore[no-untyped-def]
    """Write the rows of jacket temperature and controller integral, and their derivatives with time."""
    block, slots, slope = row(s, w, at.W_BLOCK), row(s, w, at.W_SLOTS), row(s, w, at.W_SLOPE)
    nz, n = entry(s, at.N_STATES), entry(s, at.N_ROWS)
    at_jacket = entry(s, at.AT_SLOTS) + (nz + 1) * n + nz
    at_integral = at_jacket + n
    gain, reset, to_jacket = load(block, at.GAIN), load(block, at.RESET_INVERSE), load(block, at.JACKET_CAPACITY_INVERSE)
    u = opening(block, T, load(y, nz + 2))
    renewal, steeper = load(block, at.JACKET_RENEWAL), load(block, at.INLET) - load(y, nz + 1)
    by_opening = renewal * steeper * gain * where(u > 0.0, where(u < 1.0, 1.0, 0.0), 0.0)
    store(slots, entry(s, at_jacket), by_opening + to_jacket * ua)
    store(slots, entry(s, at_jacket + 1), -renewal * where(u > 1.0, 1.0, where(u < 0.0, 0.0, u)) - to_jacket * ua)
    store(slots, entry(s, at_jacket + 2), by_opening * reset)
    store(slope, nz + 1, to_jacket * through_t)
    outside, active = beyond(u), where(reset > 0.0, 1.0, 0.0)
    share = where(outside < 1.0, 1.0 - outside, 0.0)
    side = where(outside < 1.0, where(u > 1.0, -1.0 / BAND, where(u < 0.0, 1.0 / BAND, 0.0)), 0.0)
    by_error = active * side * gain * (T - load(block, at.SET_POINT))
    store(slots, entry(s, at_integral), active * share + by_error)
    store(slots, entry(s, at_integral + 2), by_error * reset)
    store(slope, nz + 2, 0.0)


@compiled
def start_of_step(s, f, w, time):  # type: ignore[no-untyped-def]
    """Write dy/dt at the state, the Jacobian into its slots and df/dt; note how heat release and duty (W, W/s) and dT/dt (K/s,
    K/s2) stand and change along the solution."""
    block, lanes, slope, slots = row(s, w, at.W_BLOCK), row(s, w, at.W_LANE), row(s, w, at.W_SLOPE), row(s, w, at.W_SLOTS)
    y, now = row(s, w, at.W_Y), row(s, w, at.W_F)
    nz, n = entry(s, at.N_STATES), entry(s, at.N_ROWS)
    T, jacket = load(y, nz), load(y, nz + 1)
    volume = composition(s, f, w, y, time)
    rates_with_slopes(s, f, w, T, volume)
    capacity, gained = balances(s, f, w, y, T, volume, now)
    for k in range(entry(s, at.N_SLOTS)):
        store(slots, k, 0.0)
    chemical_rows(s, f, w)
    heat_T, heat_t, reference_T, reference_t, capacity_T = heat_slopes(s, f, w, T)
    ua = load(block, at.UA_CONSTANT) + load(block, at.UA_PER_VOLUME) * volume
    through_t = load(block, at.UA_PER_VOLUME) * load(block, at.VOLUME_RATE) * (T - jacket)
    jacket_rows(s, w, y, T, ua, through_t)
    cp_feed = load(block, at.FEED_CP) + T * (load(block, at.FEED_CP + 1) + T * (load(block, at.FEED_CP + 2) + T * load(block, at.FEED_CP + 3)))
    free, loss, drift = load(block, at.FREE), load(block, at.LOSS), load(now, nz)
    gained_T = heat_T - loss - cp_feed
    wall_on, hold, held, open_slope = spread(1.0), spread(0.0), spread(0.0), free
    if entry(s, at.HAS_DUTY) == 1:
        off, set_slope = gained / capacity, (load(block, at.SET_POINT) - T) * load(block, at.HOLD_RATE)
        on = load(block, at.DUTY_ON) > 0.5
        holding = on & (set_slope < off) & (set_slope > off - load(block, at.DUTY) / capacity)
        open_slope, hold = where(holding, 0.0, free), where(holding, -load(block, at.HOLD_RATE), 0.0)
        wall_on, held = where(on, 0.0, 1.0), where(holding, 1.0, 0.0)
    inverse, is_free = open_slope / capacity, free > 0.5
    at_T = entry(s, at.AT_SLOTS) + nz * n
    at_energy = at_T + 3 * n
    heat_slope, rate_slope = heat_t + heat_T * drift, spread(0.0)
    for l in range(nz):
        by_z, along = load(row(s, w, at.W_HEAT_Z), l), load(now, l)
        net = by_z - drift * load(row(s, w, at.W_CP_Z), l)
        heat_slope = heat_slope + by_z * along
        rate_slope = rate_slope + net * inverse * along
        store(slots, entry(s, at_T + l), net * inverse)
        store(slots, entry(s, at_energy + l), load(row(s, w, at.W_REFERENCE_Z), l) - where(is_free, held * net, by_z))
    T_T, T_jacket = (gained_T - wall_on * ua - drift * capacity_T) * inverse + hold, wall_on * ua * inverse
    T_t = (heat_t - wall_on * through_t - drift * cp_feed) * inverse
    store(slots, entry(s, at_T + nz), T_T)
    store(slots, entry(s, at_T + nz + 1), T_jacket)
    store(slope, nz, T_t)
    duty_T = where(is_free, ua * wall_on + held * (gained_T - drift * capacity_T - capacity * hold), gained_T)
    store(slots, entry(s, at_energy + nz), reference_T - loss - duty_T)
    store(slots, entry(s, at_energy + nz + 1), where(is_free, ua * wall_on, 0.0))
    store(slope, nz + 3, reference_t - where(is_free, through_t * wall_on + held * (heat_t - drift * cp_feed), heat_t))
    needed = heat_slope - (loss + cp_feed) * drift
    through_slope = through_t + ua * (drift - load(now, nz + 1))
    store(lanes, at.L_HEAT, load(lanes, at.L_HEAT_NOW))
    store(lanes, at.L_DUTY, load(lanes, at.L_DUTY_NOW))
    store(lanes, at.L_HEAT_SLOPE, heat_slope)
    store(lanes, at.L_DUTY_SLOPE, where(wall_on > 0.5, where(is_free, through_slope, needed), where(hold < 0.0, needed, 0.0)))
    store(lanes, at.L_RATE, drift)
    store(lanes, at.L_RATE_SLOPE, T_t + rate_slope + T_T * drift + T_jacket * load(now, nz + 1))
