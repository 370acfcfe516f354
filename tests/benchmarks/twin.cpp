// The march in C++ with explicit vectors, from the same tables and through the same door as sweep/kernel: what the compiled kernel's time is
// held against. Function by function as there; names of rows and entries come from sweep/kernel/layout.py through layout.h, made by twin.py.
#include <cmath>
#include <cstdint>
#include <initializer_list>
#include <immintrin.h>
#include "layout.h"
typedef double v8 __attribute__((vector_size(64)));
typedef int64_t m8 __attribute__((vector_size(64)));
constexpr int P = LANES / 8;
struct M { m8 p[P]; };
struct V {
  v8 p[P];
  V() = default;
  V(double x) { for (auto& q : p) q = v8{} + x; }
};
#define EACH for (int i_ = 0; i_ < P; ++i_)
#define BINARY(op) static inline V operator op(V a, V b) { V r; EACH r.p[i_] = a.p[i_] op b.p[i_]; return r; }
BINARY(+) BINARY(-) BINARY(*) BINARY(/)
#define COMPARE(op) static inline M operator op(V a, V b) { M r; EACH r.p[i_] = a.p[i_] op b.p[i_]; return r; }
COMPARE(<) COMPARE(<=) COMPARE(>) COMPARE(>=)
static inline M operator&(M a, M b) { M r; EACH r.p[i_] = a.p[i_] & b.p[i_]; return r; }
static inline M operator|(M a, M b) { M r; EACH r.p[i_] = a.p[i_] | b.p[i_]; return r; }
static inline M operator~(M a) { M r; EACH r.p[i_] = ~a.p[i_]; return r; }
static inline V operator-(V a) { V r; EACH r.p[i_] = -a.p[i_]; return r; }
static inline V where(M m, V a, V b) { V r; EACH r.p[i_] = m.p[i_] ? a.p[i_] : b.p[i_]; return r; }
static inline V size(V a) { V r; EACH r.p[i_] = (v8)((m8)a.p[i_] & 0x7FFFFFFFFFFFFFFFLL); return r; }
#ifdef __AVX512DQ__
static inline unsigned bits(M m) { unsigned r = 0; EACH r |= unsigned(_mm512_movepi64_mask((__m512i)m.p[i_])) << (8 * i_); return r; }
static inline M mask_of(unsigned b) { M r; EACH r.p[i_] = (m8)_mm512_movm_epi64(b >> (8 * i_)); return r; }
static inline V root(V a) { V r; EACH r.p[i_] = (v8)_mm512_sqrt_pd((__m512d)a.p[i_]); return r; }
#else
static inline unsigned bits(M m) { unsigned r = 0; EACH for (int k = 0; k < 8; ++k) r |= unsigned(m.p[i_][k] < 0) << (8 * i_ + k); return r; }
static inline M mask_of(unsigned b) { M r; EACH for (int k = 0; k < 8; ++k) r.p[i_][k] = -int64_t(b >> (8 * i_ + k) & 1); return r; }
static inline V root(V a) { V r; EACH for (int k = 0; k < 8; ++k) r.p[i_][k] = std::sqrt(a.p[i_][k]); return r; }
#endif
static inline V scaled(V x, V n) { V r; EACH r.p[i_] = (v8)((m8)x.p[i_] + ((m8)n.p[i_] << 52)); return r; }
static inline V exponent(V x) { V r; EACH r.p[i_] = (v8)(((m8)x.p[i_] >> 52 & 0xFFF) | 0x4330000000000000LL) - (0x1p52 + 1023.0); return r; }
static inline V mantissa(V x) { V r; EACH r.p[i_] = (v8)(((m8)x.p[i_] & 0x000FFFFFFFFFFFFFLL) | 0x3FF0000000000000LL); return r; }
constexpr double SHIFT = 6755399441055744.0, HIGH = 6.93147180369123816490e-01, LOW = 1.90821492927058770002e-10, NEVER = 1e300;
static inline V exp(V x) {
  x = where(x < -700.0, -700.0, x); x = where(x > 700.0, 700.0, x);
  V shifted = x * 1.4426950408889634 + SHIFT, n = shifted - SHIFT, r = (x - n * HIGH) - n * LOW, r2 = r * r, r4 = r2 * r2;
  V low = (r * (1.0 / 6.0) + 0.5) * r2 + (r + 1.0), middle = (r * (1.0 / 5040.0) + 1.0 / 720.0) * r2 + (r * (1.0 / 120.0) + 1.0 / 24.0);
  V high = (r * (1.0 / 39916800.0) + 1.0 / 3628800.0) * r2 + (r * (1.0 / 362880.0) + 1.0 / 40320.0);
  return scaled(((high + r4 * (1.0 / 479001600.0)) * r4 + middle) * r4 + low, shifted);
}
static inline V log(V x) {
  V e = exponent(x), m = mantissa(x); M high = m > 1.4142135623730951;
  m = where(high, m * 0.5, m); e = where(high, e + 1.0, e);
  V t = (m - 1.0) / (m + 1.0), q = t * t, p = q * (1.0 / 23.0) + 1.0 / 21.0;
  for (int k = 19; k > 0; k -= 2) p = p * q + 1.0 / k;
  return e * HIGH + (2.0 * t * p + e * LOW);
}
static inline V rough_power(V x, double power) {
  V m = mantissa(x);
  V y = power * (exponent(x) + (-2.49835315 + m * (4.02921139 + m * (-2.07833517 + m * (0.62603218 - 0.07844068 * m)))));
  V shifted = y + SHIFT, r = y - (shifted - SHIFT);
  return scaled(0.99992456 + r * (0.69313673 + r * (0.24263948 + r * 0.05583828)), shifted);
}
struct K { const int64_t* s; const double* f; V* w; V* row(int64_t name) const { return w + s[name]; } };
#define TABLES const int64_t* const s = k.s; const double* const f = k.f; V* const block = k.row(W_BLOCK); (void)s; (void)f; (void)block;
static inline double& lane(V* a, int64_t i, int l) { return ((double*)(a + i))[l]; }

static V composition(const K& k, const V* y, V time) {
  TABLES V *n = k.row(W_N), *c = k.row(W_C); V elapsed = time - block[T_START], volume = block[VOLUME] + block[VOLUME_RATE] * elapsed, inverse = 1.0 / volume;
  int64_t feed = s[BLOCK_FEED], base = s[BLOCK_BASE], p = s[AT_AMOUNTS];
  for (int64_t i = 0; i < s[N_SPECIES]; ++i) {
    V amount = block[base + i] + block[feed + i] * elapsed; int64_t end = p + 1 + s[p];
    for (int64_t q = p + 1; q < end; ++q) amount = amount + f[q] * y[s[q]];
    p = end; n[i] = amount; c[i] = amount * inverse;
  }
  return volume;
}
static inline V rate_constant(const K& k, int64_t t, V T, V inverse, V logT) {
  TABLES V value = block[t] + block[t + 1] * inverse;
  if (s[RATE_TERMS] == 6) value = value + block[t + 2] * logT + T * (block[t + 3] + T * (block[t + 4] + T * block[t + 5]));
  return value;
}
static inline V fractional(const K& k, const V* c, int64_t p, int64_t count, V delta) {
  TABLES V total = 0.0;
  for (int64_t q = p; q < p + 3 * count; q += 3) total = total + f[q + 1] * log(size(c[s[q]]) + delta);
  return total;
}
static void rates(const K& k, V T, V volume) {
  TABLES const V* c = k.row(W_C); V* result = k.row(W_R); V inverse = 1.0 / T, logT = T, delta = k.row(W_LANE)[L_DELTA];
  if (s[RATE_TERMS] == 6) logT = log(where(T > 1.0, T, 1.0));
  int64_t terms = s[BLOCK_RATE], p = s[AT_REACTIONS];
  for (int64_t j = 0; j < s[N_REACTIONS]; ++j) {
    V total = 0.0; int64_t directions = s[p++];
    for (; directions > 0; --directions) {
      int64_t count = s[p], logs = s[p + 1]; double sign = f[p]; p += 2;
      V lnk = rate_constant(k, terms, T, inverse, logT);
      if (logs == 1) lnk = lnk + fractional(k, c, p, count, delta);
      V rate = exp(lnk), least = 1.0; int64_t end = p + 3 * count;
      for (int64_t q = p; q < end; q += 3) {
        V x = c[s[q]]; least = where(x < least, x, least); rate = rate * x;
        for (int64_t more = 1; more < s[q + 1]; ++more) rate = rate * x;
      }
      p = end; total = total + sign * where(least < 0.0, -size(rate), rate); terms += s[RATE_TERMS];
    }
    result[j] = total * volume;
  }
}
static inline V polynomial(const V* block, int64_t first, int64_t terms, V T) {
  V value = block[first + terms - 1];
  for (int64_t q = first + terms - 2; q >= first; --q) value = value * T + block[q];
  return value;
}
static inline V polynomial_slope(const V* block, int64_t first, int64_t terms, V T) {
  V value = 0.0;
  for (int64_t q = terms - 1; q > 0; --q) value = value * T + double(q) * block[first + q];
  return value;
}
static inline V clipped(V u) { return where(u > 1.0, 1.0, where(u < 0.0, 0.0, u)); }
static inline V opening(const V* b, V T, V integral) { return b[OPENING] + b[GAIN] * ((T - b[SET_POINT]) + integral * b[RESET_INVERSE]); }
static inline V beyond(V u) { return where(u > 1.0, u - 1.0, where(u < 0.0, -u, 0.0)) * (1.0 / BAND); }

static void balances(const K& k, const V* y, V T, V volume, V* result, V& capacity, V& gained) {
  TABLES V *r = k.row(W_R), *lanes = k.row(W_LANE), *n = k.row(W_N), *cp = k.row(W_CP), *heats = k.row(W_HEAT), *reference = k.row(W_REFERENCE);
  int64_t nz = s[N_STATES], p = s[AT_SOURCES];
  for (int64_t z = 0; z < nz; ++z) {
    V total = 0.0; int64_t end = p + 1 + s[p];
    for (int64_t q = p + 1; q < end; ++q) total = total + f[q] * r[s[q]];
    p = end; result[z] = total;
  }
  capacity = block[WALL];
  for (int64_t i = 0; i < s[N_SPECIES]; ++i) {
    V value = polynomial(block, s[BLOCK_CP] + i * s[CP_TERMS], s[CP_TERMS], T); cp[i] = value; capacity = capacity + value * n[i];
  }
  V heat = 0.0, at_reference = 0.0;
  for (int64_t j = 0; j < s[N_REACTIONS]; ++j) {
    V one = polynomial(block, s[BLOCK_HEAT] + j * s[HEAT_TERMS], s[HEAT_TERMS], T), rate = r[j];
    heats[j] = one; heat = heat - one * rate; at_reference = at_reference - reference[j] * rate;
  }
  V jacket = y[nz + 1], integral = y[nz + 2], through = (block[UA_CONSTANT] + block[UA_PER_VOLUME] * volume) * (T - jacket);
  V others = block[STIRRER] - block[LOSS] * (T - block[AMBIENT]);
  V fed = T * (block[FEED_CP] + T * (block[FEED_CP + 1] * 0.5 + T * (block[FEED_CP + 2] * (1.0 / 3.0) + T * (block[FEED_CP + 3] * 0.25)))) - block[FEED_HEAT];
  gained = heat + others - fed;
  V free = block[FREE], inverse = 1.0 / capacity, slope = (gained - through) * inverse, duty = where(free > 0.5, through, gained);
  if (s[HAS_DUTY] == 1) {
    M on = block[DUTY_ON] > 0.5; V off = gained * inverse, full = off - block[DUTY] * inverse, hold = (block[SET_POINT] - T) * block[HOLD_RATE];
    V held = where(hold > off, off, where(hold < full, full, hold));
    slope = where(on, held, slope); duty = where(on, gained - capacity * held, duty);
  }
  slope = slope * free; result[nz] = slope;
  V u = opening(block, T, integral);
  result[nz + 1] = block[JACKET_RENEWAL] * clipped(u) * (block[INLET] - jacket) + block[JACKET_CAPACITY_INVERSE] * through;
  V share = 1.0 - beyond(u), moving = where(share > 0.0, share, 0.0) * (T - block[SET_POINT]);
  result[nz + 2] = where(block[RESET_INVERSE] > 0.0, moving, 0.0);
  result[nz + 3] = others - duty + at_reference + lanes[L_BROUGHT];
  lanes[L_HEAT_NOW] = heat; lanes[L_DUTY_NOW] = duty; lanes[L_RATE_NOW] = slope;
}
static void right_side(const K& k, const V* y, V time, V* result) {
  V volume = composition(k, y, time), T = y[k.s[N_STATES]], capacity, gained;
  rates(k, T, volume); balances(k, y, T, volume, result, capacity, gained);
}
static void rates_with_slopes(const K& k, V T, V volume) {
  TABLES V *c = k.row(W_C), *d = k.row(W_D), *result = k.row(W_R); V inverse = 1.0 / T, logT = T;
  if (s[RATE_TERMS] == 6) logT = log(where(T > 1.0, T, 1.0));
  V grow = block[VOLUME_RATE], delta = k.row(W_LANE)[L_DELTA];
  int64_t feed = s[BLOCK_FEED], nz = s[N_STATES], terms = s[BLOCK_RATE], p = s[AT_REACTIONS];
  for (int64_t j = 0; j < s[N_REACTIONS]; ++j) {
    V total = 0.0, by_T = 0.0, by_time = 0.0; V* dj = d + j * nz;
    for (int64_t l = 0; l < nz; ++l) dj[l] = 0.0;
    for (int64_t directions = s[p++]; directions > 0; --directions) {
      int64_t count = s[p], logs = s[p + 1]; double sign = f[p]; p += 2;
      V lnk = rate_constant(k, terms, T, inverse, logT);
      if (logs == 1) lnk = lnk + fractional(k, c, p, count, delta);
      V kk = exp(lnk), rate = kk, least = 1.0; int64_t end = p + 3 * count;
      for (int64_t q = p; q < end; q += 3) {
        V x = c[s[q]]; least = where(x < least, x, least); rate = rate * x;
        for (int64_t more = 1; more < s[q + 1]; ++more) rate = rate * x;
      }
      V odd = sign * where(least < 0.0, where(rate > 0.0, -1.0, 1.0), 1.0), lnk_T = -block[terms + 1] * inverse * inverse;
      if (s[RATE_TERMS] == 6)
        lnk_T = lnk_T + block[terms + 2] * inverse + (block[terms + 3] + T * (2.0 * block[terms + 4] + 3.0 * T * block[terms + 5]));
      total = total + odd * rate; by_T = by_T + odd * rate * lnk_T; by_time = by_time + odd * rate * grow;
      for (int64_t q = p; q < end; q += 3) {
        int64_t i = s[q], power = s[q + 1]; double extra = f[q + 1]; V x = c[i], slope = kk * double(power);
        if (extra != 0.0) slope = kk * (double(power) + extra * size(x) / (size(x) + delta));
        for (int64_t m = 1; m < power; ++m) slope = slope * x;
        for (int64_t other = p; other < end; other += 3)
          if (other != q) for (int64_t m = 0; m < s[other + 1]; ++m) slope = slope * c[s[other]];
        slope = odd * slope; by_time = by_time + slope * (block[feed + i] - c[i] * grow);
        int64_t a = s[q + 2];
        for (int64_t e = a + 1; e < a + 1 + s[a]; ++e) dj[s[e]] = dj[s[e]] + slope * f[e];
      }
      p = end; terms += s[RATE_TERMS];
    }
    result[j] = total * volume; k.row(W_R_T)[j] = by_T * volume; k.row(W_R_TIME)[j] = by_time;
  }
}
static void start_of_step(const K& k, V time) {
  TABLES V *lanes = k.row(W_LANE), *slope = k.row(W_SLOPE), *slots = k.row(W_SLOTS), *y = k.row(W_Y), *now = k.row(W_F), *d = k.row(W_D);
  int64_t nz = s[N_STATES], n = s[N_ROWS]; V T = y[nz], jacket = y[nz + 1], volume = composition(k, y, time), capacity, gained;
  rates_with_slopes(k, T, volume); balances(k, y, T, volume, now, capacity, gained);
  for (int64_t q = 0; q < s[N_SLOTS]; ++q) slots[q] = 0.0;
  V *by_T = k.row(W_R_T), *by_time = k.row(W_R_TIME);
  for (int64_t z = 0, p = s[AT_CHEMICAL], r = s[AT_SOURCES]; z < nz; ++z) {
    V at_T = 0.0, at_time = 0.0; int64_t end = r + 1 + s[r];
    for (int64_t q = r + 1; q < end; ++q) { at_T = at_T + f[q] * by_T[s[q]]; at_time = at_time + f[q] * by_time[s[q]]; }
    r = end; slots[s[p]] = at_T; slope[z] = at_time; int64_t columns = s[p + 1]; p += 2;
    for (; columns > 0; --columns) {
      V total = 0.0; int64_t place = s[p]; end = p + 2 + s[p + 1];
      for (int64_t q = p + 2; q < end; ++q) total = total + f[q] * d[s[q]];
      p = end; slots[place] = total;
    }
  }
  V *by_z = k.row(W_HEAT_Z), *reference_z = k.row(W_REFERENCE_Z), *cp_z = k.row(W_CP_Z), *heats = k.row(W_HEAT), *reference = k.row(W_REFERENCE);
  for (int64_t l = 0, p = s[AT_COLUMNS]; l < nz; ++l) {
    V total = 0.0; int64_t end = p + 1 + s[p];
    for (int64_t q = p + 1; q < end; ++q) total = total + f[q] * k.row(W_CP)[s[q]];
    p = end; cp_z[l] = total; by_z[l] = 0.0; reference_z[l] = 0.0;
  }
  V heat_T = 0.0, heat_t = 0.0, reference_T = 0.0, reference_t = 0.0, capacity_T = 0.0;
  for (int64_t j = 0, p = s[AT_TOUCHED]; j < s[N_REACTIONS]; ++j) {
    V heat = heats[j], at_reference = reference[j];
    heat_T = heat_T - heat * by_T[j] - polynomial_slope(block, s[BLOCK_HEAT] + j * s[HEAT_TERMS], s[HEAT_TERMS], T) * k.row(W_R)[j];
    heat_t = heat_t - heat * by_time[j];
    reference_T = reference_T - at_reference * by_T[j]; reference_t = reference_t - at_reference * by_time[j];
    int64_t end = p + 1 + s[p];
    for (int64_t q = p + 1; q < end; ++q) {
      int64_t l = s[q]; V one = d[j * nz + l]; by_z[l] = by_z[l] - heat * one; reference_z[l] = reference_z[l] - at_reference * one;
    }
    p = end;
  }
  if (s[CP_TERMS] > 1)
    for (int64_t i = 0; i < s[N_SPECIES]; ++i)
      capacity_T = capacity_T + k.row(W_N)[i] * polynomial_slope(block, s[BLOCK_CP] + i * s[CP_TERMS], s[CP_TERMS], T);
  V ua = block[UA_CONSTANT] + block[UA_PER_VOLUME] * volume, through_t = block[UA_PER_VOLUME] * block[VOLUME_RATE] * (T - jacket);
  {
    const int64_t *at_jacket = s + s[AT_SLOTS] + (nz + 1) * n + nz, *at_integral = at_jacket + n;
    V gain = block[GAIN], reset = block[RESET_INVERSE], to = block[JACKET_CAPACITY_INVERSE], u = opening(block, T, y[nz + 2]), renewal = block[JACKET_RENEWAL];
    V by_opening = renewal * (block[INLET] - jacket) * gain * where(u > 0.0, where(u < 1.0, 1.0, 0.0), 0.0);
    slots[at_jacket[0]] = by_opening + to * ua; slots[at_jacket[1]] = -renewal * clipped(u) - to * ua; slots[at_jacket[2]] = by_opening * reset;
    slope[nz + 1] = to * through_t;
    V outside = beyond(u), active = where(reset > 0.0, 1.0, 0.0), share = where(outside < 1.0, 1.0 - outside, 0.0);
    V side = where(outside < 1.0, where(u > 1.0, -1.0 / BAND, where(u < 0.0, 1.0 / BAND, 0.0)), 0.0), by_error = active * side * gain * (T - block[SET_POINT]);
    slots[at_integral[0]] = active * share + by_error; slots[at_integral[2]] = by_error * reset; slope[nz + 2] = 0.0;
  }
  V cp_feed = block[FEED_CP] + T * (block[FEED_CP + 1] + T * (block[FEED_CP + 2] + T * block[FEED_CP + 3]));
  V free = block[FREE], loss = block[LOSS], drift = now[nz], gained_T = heat_T - loss - cp_feed, wall_on = 1.0, hold = 0.0, held = 0.0, open_slope = free;
  if (s[HAS_DUTY] == 1) {
    V off = gained / capacity, set_slope = (block[SET_POINT] - T) * block[HOLD_RATE]; M on = block[DUTY_ON] > 0.5;
    M holding = on & (set_slope < off) & (set_slope > off - block[DUTY] / capacity);
    open_slope = where(holding, 0.0, free); hold = where(holding, -block[HOLD_RATE], 0.0); wall_on = where(on, 0.0, 1.0); held = where(holding, 1.0, 0.0);
  }
  V inverse = open_slope / capacity; M is_free = free > 0.5; const int64_t *at_T = s + s[AT_SLOTS] + nz * n, *at_energy = at_T + 3 * n;
  V heat_slope = heat_t + heat_T * drift, rate_slope = 0.0;
  for (int64_t l = 0; l < nz; ++l) {
    V one = by_z[l], along = now[l], net = one - drift * cp_z[l];
    heat_slope = heat_slope + one * along; rate_slope = rate_slope + net * inverse * along;
    slots[at_T[l]] = net * inverse; slots[at_energy[l]] = reference_z[l] - where(is_free, held * net, one);
  }
  V T_T = (gained_T - wall_on * ua - drift * capacity_T) * inverse + hold, T_jacket = wall_on * ua * inverse;
  V T_t = (heat_t - wall_on * through_t - drift * cp_feed) * inverse;
  slots[at_T[nz]] = T_T; slots[at_T[nz + 1]] = T_jacket; slope[nz] = T_t;
  V duty_T = where(is_free, ua * wall_on + held * (gained_T - drift * capacity_T - capacity * hold), gained_T);
  slots[at_energy[nz]] = reference_T - loss - duty_T; slots[at_energy[nz + 1]] = where(is_free, ua * wall_on, 0.0);
  slope[nz + 3] = reference_t - where(is_free, through_t * wall_on + held * (heat_t - drift * cp_feed), heat_t);
  V needed = heat_slope - (loss + cp_feed) * drift, through_slope = through_t + ua * (drift - now[nz + 1]);
  lanes[L_HEAT] = lanes[L_HEAT_NOW]; lanes[L_DUTY] = lanes[L_DUTY_NOW]; lanes[L_HEAT_SLOPE] = heat_slope;
  lanes[L_DUTY_SLOPE] = where(wall_on > 0.5, where(is_free, through_slope, needed), where(hold < 0.0, needed, 0.0));
  lanes[L_RATE] = drift; lanes[L_RATE_SLOPE] = T_t + rate_slope + T_T * drift + T_jacket * now[nz + 1];
}
#include "twin_step.h"
