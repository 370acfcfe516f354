// The rest of the twin: linear algebra, one step, its control, what is followed, the lanes, the march.
static void factorise(const K& k, V diagonal) {
  TABLES V* slots = k.row(W_SLOTS); int64_t n = s[N_ROWS], p = s[AT_SLOTS];
  for (int64_t q = p; q < p + n * n; q += n + 1) slots[s[q]] = slots[s[q]] - diagonal;
  p = s[AT_FACTOR];
  for (int64_t i = 0; i < n; ++i) {
    V pivot = 1.0 / slots[s[p]]; slots[s[p]] = pivot; int64_t rows = s[p + 1]; p += 2;
    for (; rows > 0; --rows) {
      V share = slots[s[p]] * pivot; slots[s[p]] = share; int64_t end = p + 2 + 2 * s[p + 1];
      for (int64_t q = p + 2; q < end; q += 2) slots[s[q]] = slots[s[q]] - share * slots[s[q + 1]];
      p = end;
    }
  }
}
static void solve(const K& k, V* x) {
  TABLES const V* slots = k.row(W_SLOTS); int64_t p = s[AT_FORWARD];
  while (s[p] >= 0) {
    int64_t i = s[p], end = p + 2 + 2 * s[p + 1]; V total = x[i];
    for (int64_t q = p + 2; q < end; q += 2) total = total - slots[s[q + 1]] * x[s[q]];
    p = end; x[i] = total;
  }
  p = s[AT_BACKWARD];
  for (int64_t rows = s[N_ROWS]; rows > 0; --rows) {
    int64_t i = s[p], pivot = s[p + 1], end = p + 3 + 2 * s[p + 2]; V total = x[i];
    for (int64_t q = p + 3; q < end; q += 2) total = total - slots[s[q + 1]] * x[s[q]];
    p = end; x[i] = total * slots[pivot];
  }
}
constexpr int64_t LINE = 2 * STAGES, COUPLING = 1 + STAGES;
static void stages(const K& k, V time, V h) {
  TABLES V *y = k.row(W_Y), *fresh = k.row(W_NEW), *now = k.row(W_F), *by_time = k.row(W_SLOPE), *ks = k.row(W_K);
  int64_t n = s[N_ROWS]; const double* line = f + s[AT_METHOD]; V inverse = 1.0 / h, share = h * line[1];
  for (int64_t i = 0; i < n; ++i) ks[i] = -(now[i] + share * by_time[i]);
  solve(k, ks);
  for (int64_t stage = 1; stage < STAGES; ++stage) {
    line += LINE; V *here = ks + stage * n, *last = here - n;
    for (int64_t i = 0; i < n; ++i) {
      V state = y[i], before = 0.0;
      for (int64_t j = 0; j < stage; ++j) { V kj = ks[j * n + i]; state = state + line[2 + j] * kj; before = before + line[COUPLING + j] * kj; }
      if (stage >= FRESH) state = fresh[i] + last[i];
      fresh[i] = state; here[i] = before;
    }
    right_side(k, fresh, time + h * line[0], now); share = h * line[1];
    for (int64_t i = 0; i < n; ++i) here[i] = -(now[i] + share * by_time[i] + inverse * here[i]);
    solve(k, here);
  }
  for (int64_t i = 0; i < n; ++i) fresh[i] = fresh[i] + ks[(STAGES - 1) * n + i];
}
static V error_of_step(const K& k, double tolerance) {
  TABLES int64_t n = s[N_ROWS], nz = s[N_STATES], p = s[AT_AMOUNTS]; V *amounts = k.row(W_N), atol = k.row(W_LANE)[L_ATOL], *error = k.row(W_K) + (STAGES - 1) * n;
  V worst = 1.0 * block[GAIN] * block[RESET_INVERSE] * size(error[nz + 2]), allowed = 1.0, sound = worst;
  for (int64_t i = nz; i < nz + 2; ++i) { V wrong = size(error[i]) * 0.01; worst = where(wrong > worst, wrong, worst); sound = sound + wrong; }
  for (int64_t i = 0; i < s[N_SPECIES]; ++i) {
    V wrong = 0.0; int64_t end = p + 1 + s[p];
    for (int64_t q = p + 1; q < end; ++q) wrong = wrong + f[q] * error[s[q]];
    p = end; wrong = size(wrong); V scale = size(amounts[i]) + atol; M worse = wrong * allowed > worst * scale;
    worst = where(worse, wrong, worst); allowed = where(worse, scale, allowed); sound = sound + wrong;
  }
  return where(sound <= 1e300, worst / (allowed * (SHARE * tolerance)), INFINITY);
}
static void dense_output(const K& k, M good) {
  TABLES V *y = k.row(W_Y), *before = k.row(W_BEFORE), *ks = k.row(W_K), *ps = k.row(W_P), *qs = k.row(W_Q), *rs = k.row(W_DENSE);
  int64_t n = s[N_ROWS]; const double* line = f + s[AT_METHOD] + STAGES * LINE;
  for (int64_t i = 0; i < n; ++i) {
    V p = 0.0, q = 0.0, r = 0.0;
    for (int64_t j = 0; j < STAGES; ++j) { V kj = ks[j * n + i]; p = p + line[j] * kj; q = q + line[STAGES + j] * kj; r = r + line[2 * STAGES + j] * kj; }
    ps[i] = where(good, p, ps[i]); qs[i] = where(good, q, qs[i]); rs[i] = where(good, r, rs[i]); before[i] = where(good, y[i], before[i]);
  }
}
static V next_step(V* lanes, V wrong, M fine, V h) {
  V shrink = rough_power(where(wrong > 1e-8, wrong, 1e-8), -0.2), factor = 0.9 * shrink, before = lanes[L_SHRINK_BEFORE], h_before = lanes[L_GOOD_STEP];
  M known = fine & (h_before > 0.0); V ahead = factor * shrink * h / where(known, h_before * before, 1.0);
  factor = where(known & (ahead < factor), ahead, factor);
  lanes[L_SHRINK_BEFORE] = where(fine, where(shrink < 2.5, shrink, 2.5), before); lanes[L_GOOD_STEP] = where(fine, h, h_before);
  factor = where(factor > 6.0, 6.0, factor); factor = where(factor >= 0.2, factor, 0.2);
  V again = where(lanes[L_FAILED_LAST] > 0.5, where(factor > 1.0, 1.0, factor), factor);
  return h * where(fine, again, where(factor > 0.9, 0.9, factor));
}
static M move_on(V* lanes, M good, M rejected, V time, V h, V wanted, M& too_short) {
  V end = lanes[L_SEGMENT_END], reached = time + h; M landed = good & (end - reached <= 1e-13 * where(end > 0.0, end, -end));
  V now = where(landed, end, where(good, reached, time)), left = end - now;
  V fitted = where(wanted >= left, left, where(wanted > 0.5 * left, 0.5 * left, wanted));
  lanes[L_TIME] = now; lanes[L_STEP] = where(good | rejected, fitted, h);
  lanes[L_STEPS] = lanes[L_STEPS] + where(good, 1.0, 0.0); lanes[L_REJECTED] = lanes[L_REJECTED] + where(rejected, 1.0, 0.0);
  lanes[L_FAILED_LAST] = where(rejected, 1.0, 0.0); too_short = ~(fitted > 1e-15 * now);
  return landed;
}
template <class T> struct Path { T y0, y1, p, q, r; };
template <class T> static inline T on_path(const Path<T>& a, T x) {
  T rest = 1.0 - x; return rest * a.y0 + x * (a.y1 + rest * (a.p + x * (a.q + x * a.r)));
}
static double path_slope(const Path<double>& a, double x) {
  return (a.y1 - a.y0 + a.p) + x * (2.0 * (a.q - a.p) + x * (3.0 * (a.r - a.q) - 4.0 * x * a.r));
}
static void path_peak(const Path<double>& g, double until, double& best, double& value) {
  best = 0.0; value = g.y0; double end = on_path(g, until);
  if (end > value) { best = until; value = end; }
  double a = -6.0 * g.r, b = 3.0 * (g.r - g.q), c = g.q - g.p, spread = b * b - 4.0 * a * c, first = until, second = until, low = 0.0;
  if (spread > 0.0) {
    double half = -0.5 * (b + std::copysign(std::sqrt(spread), b));
    first = a != 0.0 ? half / a : until; second = half != 0.0 ? c / half : until;
  }
  for (int piece = 0; piece < 3; ++piece) {
    double high = piece == 0 ? std::fmin(first, second) : piece == 1 ? std::fmax(first, second) : until;
    high = std::fmin(std::fmax(high, low), until);
    if (path_slope(g, low) > 0.0 && path_slope(g, high) < 0.0) {
      double l = low, r = high;
      for (int i = 0; i < 48; ++i) { double m = 0.5 * (l + r); (path_slope(g, m) > 0.0 ? l : r) = m; }
      double place = 0.5 * (l + r), here = on_path(g, place);
      if (here > value) { best = place; value = here; }
    }
    low = high;
  }
}
static Path<V> path_of_row(const K& k, int64_t i) { return {k.row(W_Y)[i], k.row(W_NEW)[i], k.row(W_P)[i], k.row(W_Q)[i], k.row(W_DENSE)[i]}; }
static Path<double> path_of_state(const K& k, int l, int64_t i) {
  return {lane(k.row(W_Y), i, l), lane(k.row(W_NEW), i, l), lane(k.row(W_P), i, l), lane(k.row(W_Q), i, l), lane(k.row(W_DENSE), i, l)};
}
static Path<double> path_of_sum(const K& k, int l, const double* weights) {
  Path<double> t{0, 0, 0, 0, 0};
  for (int64_t i = 0; i < k.s[N_STATES]; ++i) {
    Path<double> a = path_of_state(k, l, i); double m = weights[i];
    t.y0 += m * a.y0; t.y1 += m * a.y1; t.p += m * a.p; t.q += m * a.q; t.r += m * a.r;
  }
  return t;
}
static void capture(const K& k, int l, double* target, double x) { for (int64_t i = 0; i < k.s[N_ROWS]; ++i) target[i] = on_path(path_of_state(k, l, i), x); }
struct Door { const double *blocks, *starts, *constants, *times; int64_t points, segments, n_times, out_length, most; double *out, *samples; int64_t* whose; };
static double* left(const K& k, const Door& d, int l, int which) { return d.out + d.whose[l] * d.out_length + OUT_STATES + which * k.s[N_ROWS]; }
struct Hint { M hinted; V theta, height, rise, bend; };
static Hint peak_between(V* a, M pending, V h, V highest) {
  V q0 = a[2], m0 = a[3] * h, q1 = a[0], m1 = a[1] * h, early = q0 + m0 * (1.0 / 3.0), late = q1 - m1 * (1.0 / 3.0);
  Hint t{pending & (m0 > 0.0) & (m1 < 0.0) & (where(early > late, early, late) > highest), m0, m0, m0, m0};
  if (bits(t.hinted)) {
    V c = 2.0 * (q0 - q1) + m0 + m1, b = 3.0 * (q1 - q0) - 2.0 * m0 - m1, inner = b * b - 3.0 * c * m0, below = root(where(inner > 0.0, inner, 0.0)) - b;
    t.theta = m0 / below; t.height = q0 + t.theta * (m0 + t.theta * (b + t.theta * c)); t.bend = 2.0 * b + 6.0 * t.theta * c;
    t.rise = t.height - where(q1 > q0, q1, q0);
    t.hinted = t.hinted & (inner > 0.0) & (below > 0.0) & (t.theta < 1.0) & (t.height > highest) & (t.rise > 0.0);
  }
  return t;
}
static Hint peak_at_end(V* a, V now, M ending, V h, V highest) {
  V q0 = a[0], m0 = a[1] * h, bend = 2.0 * (now - q0 - m0); M turns = ending & (m0 > 0.0) & (m0 + bend < 0.0);
  V theta = where(turns, m0 / where(turns, -bend, 1.0), 0.5), height = q0 + 0.5 * theta * m0, rise = height - where(now > q0, now, q0);
  return {turns & (height > highest) & (rise > 0.0), theta, height, rise, bend};
}
static void work_out(const K& k, int which, V start, V h, V* y0, V* y1, Hint hint, double order) {
  TABLES V *lanes = k.row(W_LANE), *state = k.row(W_K), *ps = k.row(W_P), *qs = k.row(W_Q), *rs = k.row(W_DENSE); int64_t n = s[N_ROWS];
  M hinted = hint.hinted; V theta = where(hinted, hint.theta, 0.5);
  for (int round = 0; round < 2; ++round) {
    for (int64_t i = 0; i < n; ++i) state[i] = on_path(Path<V>{y0[i], y1[i], ps[i], qs[i], rs[i]}, theta);
    V when = start + theta * h; right_side(k, state, when, state + n);
    V value = lanes[L_HEAT_NOW + which], highest = lanes[L_HEAT_MAX + which];
    hinted = hinted & (size(value - hint.height) <= 0.5 * hint.rise); M higher = hinted & (value > highest);
    lanes[L_HEAT_MAX + which] = where(higher, value, highest);
    if (which == 2) lanes[L_RATE_MAX_TIME] = where(higher, when, lanes[L_RATE_MAX_TIME]);
    V miss = value - hint.height, rest = 1.0 - theta, growth = 2.0 / theta - order / rest;
    V bend = hint.bend + miss * (growth * growth - 2.0 / (theta * theta) - order / (rest * rest)), better = where(bend < 0.0, theta - miss * growth / bend, theta);
    theta = where(hinted, where((better > 0.0) & (better < 1.0), better, theta), 0.5);
  }
}
static void look_back(const K& k, M live, V time) {
  V *lanes = k.row(W_LANE), length = lanes[L_STEP_BEFORE]; M pending = live & (lanes[L_PENDING] > 0.5) & (lanes[L_BATCH_OVER] < 0.5);
  for (int which = 0; which < 3; ++which) {
    Hint hint = peak_between(lanes + L_HEAT + 4 * which, pending, length, lanes[L_HEAT_MAX + which]);
    if (bits(hint.hinted)) work_out(k, which, time - length, length, k.row(W_BEFORE), k.row(W_Y), hint, 2.0);
  }
}
static void follow(const K& k, const Door& d, M good, V time, V h) {
  TABLES V *lanes = k.row(W_LANE), *fresh = k.row(W_NEW); int64_t nz = s[N_STATES], n = s[N_ROWS]; const double *target = f + s[AT_TARGET], *product = f + s[AT_PRODUCT];
  V reacted = 0.0; for (int64_t i = 0; i < nz; ++i) reacted = reacted + target[i] * fresh[i];
  V most = lanes[L_REACTED_MAX], crossed = lanes[L_CROSSED]; lanes[L_REACTED_MAX] = where(good & (reacted > most), reacted, most);
  for (unsigned flags = bits(good & (reacted >= lanes[L_TARGET]) & ~(crossed <= crossed)); flags; flags &= flags - 1) {
    int l = __builtin_ctz(flags); Path<double> a = path_of_sum(k, l, target); double level = lane(lanes, L_TARGET, l), low = 0.0, high = 1.0;
    if (on_path(a, 0.0) >= level) high = 0.0;
    else for (int i = 0; i < 52; ++i) { double m = 0.5 * (low + high); (on_path(a, m) >= level ? high : low) = m; }
    double when = lane(lanes, L_TIME, l) + high * lane(lanes, L_STEP, l); lane(lanes, L_CROSSED, l) = when; capture(k, l, left(k, d, l, 1), high);
    if (std::isnan(lane(lanes, L_END_FIXED, l))) lane(lanes, L_BATCH_END, l) = std::fmin(std::fmax(when, lane(lanes, L_EARLIEST, l)), lane(lanes, L_FINAL, l));
  }
  V earliest = lanes[L_EARLIEST] * (1.0 - 1e-12); M counted = good & (time + h >= earliest);
  if (bits(counted)) {
    Path<V> a{0.0, 0.0, 0.0, 0.0, 0.0};
    for (int64_t i = 0; i < nz; ++i) {
      Path<V> b = path_of_row(k, i); double m = product[i];
      a.y0 = a.y0 + m * b.y0; a.y1 = a.y1 + m * b.y1; a.p = a.p + m * b.p; a.q = a.q + m * b.q; a.r = a.r + m * b.r;
    }
    V turnaround = lanes[L_TURNAROUND], rise = a.y1 - a.y0, start = time + turnaround, end = time + h + turnaround;
    unsigned flags = bits(counted & (time >= earliest) & ((rise + a.p) * start > h * a.y0) & ((rise - a.p - a.q - a.r) * end < h * a.y1)), any = flags;
    lanes[L_THETA] = 1.0;
    for (; flags; flags &= flags - 1) {
      int l = __builtin_ctz(flags); Path<double> b = path_of_sum(k, l, product);
      double low = 0.0, high = 1.0, t = lane(lanes, L_TIME, l), step = lane(lanes, L_STEP, l), turn = lane(lanes, L_TURNAROUND, l);
      for (int i = 0; i < 40; ++i) { double m = 0.5 * (low + high); (path_slope(b, m) * (t + m * step + turn) - step * on_path(b, m) > 0.0 ? low : high) = m; }
      lane(lanes, L_THETA, l) = 0.5 * (low + high);
    }
    V theta = lanes[L_THETA], when = time + theta * h, value = on_path(a, theta) / (when + turnaround); M better = counted & (when + turnaround > 0.0) & (value > lanes[L_BEST]);
    if (bits(better)) {
      lanes[L_BEST] = where(better, value, lanes[L_BEST]); lanes[L_BEST_TIME] = where(better, when, lanes[L_BEST_TIME]); V* best = k.row(W_BEST);
      for (int64_t i = 0; i < n; ++i) { V state = any ? on_path(path_of_row(k, i), theta) : fresh[i]; best[i] = where(better, state, best[i]); }
    }
  }
  M live = good & (lanes[L_BATCH_OVER] < 0.5); V reached = time + h, end = lanes[L_BATCH_END]; M ends = live & (end <= reached * (1.0 + 1e-14));
  V until = where(ends, (end - time) / h, 1.0); until = where(until > 0.0, where(until < 1.0, until, 1.0), 0.0); lanes[L_THETA] = until;
  {
    Path<V> a = path_of_row(k, nz); V last = on_path(a, until), highest = lanes[L_T_MAX], rise = a.y1 - a.y0; M higher = live & (last > highest);
    highest = where(higher, last, highest); lanes[L_T_MAX] = highest; lanes[L_T_MAX_TIME] = where(higher, time + until * h, lanes[L_T_MAX_TIME]);
    V early = a.y0 + 0.25 * (rise + a.p), middle = a.y0 + 0.5 * (rise + a.p) + (a.q - a.p) * (1.0 / 6.0), late = a.y1 - 0.25 * (rise - a.p - a.q - a.r);
    for (unsigned flags = bits(live & ((early > highest) | (middle > highest) | (late > highest))); flags; flags &= flags - 1) {
      int l = __builtin_ctz(flags); double theta, T; path_peak(path_of_state(k, l, nz), lane(lanes, L_THETA, l), theta, T);
      if (lane(lanes, L_T_MAX, l) < T) { lane(lanes, L_T_MAX, l) = T; lane(lanes, L_T_MAX_TIME, l) = lane(lanes, L_TIME, l) + theta * lane(lanes, L_STEP, l); }
    }
  }
  V stop = lanes[L_SEGMENT_END]; M lands = stop - reached <= 1e-13 * size(stop), last = ends | lands | (fresh[nz] > lanes[L_TOO_HOT]);
  for (int which = 0; which < 3; ++which) {
    V *a = lanes + L_HEAT + 4 * which, highest = lanes[L_HEAT_MAX + which], start = a[0], finish = start + until * (lanes[L_HEAT_NOW + which] - start);
    M rises = last & (finish > start), lasting = -h * a[1] <= 10.0 * size(start); V peak = where(rises, finish, start); M higher = live & (rises | lasting) & (peak > highest);
    lanes[L_HEAT_MAX + which] = where(higher, peak, highest); a[2] = where(live, a[0], a[2]); a[3] = where(live, a[1], a[3]);
    if (which == 2) lanes[L_RATE_MAX_TIME] = where(higher, where(rises, time + until * h, time), lanes[L_RATE_MAX_TIME]);
    else lanes[L_SUM_HEAT + which] = where(live, lanes[L_SUM_HEAT + which] + 0.5 * until * h * (size(start) + size(finish)), lanes[L_SUM_HEAT + which]);
  }
  lanes[L_STEP_BEFORE] = where(live, h, lanes[L_STEP_BEFORE]); lanes[L_PENDING] = where(live, 1.0, lanes[L_PENDING]);
  for (unsigned flags = bits(ends); flags; flags &= flags - 1) {
    int l = __builtin_ctz(flags); capture(k, l, left(k, d, l, 0), lane(lanes, L_THETA, l));
    lane(lanes, L_BATCH_OVER, l) = 1.0; lane(lanes, L_END_TIME, l) = lane(lanes, L_BATCH_END, l);
  }
  V limit = where(lands, stop, reached);
  if (bits(live & lands)) {
    V* at_end = k.row(W_K) + 2 * n; for (int which = 0; which < 3; ++which) at_end[which] = lanes[L_HEAT_NOW + which];
    for (int which = 0; which < 3; ++which) {
      Hint hint = peak_at_end(lanes + L_HEAT + 4 * which, at_end[which], live & lands & (until >= 1.0), h, lanes[L_HEAT_MAX + which]);
      if (bits(hint.hinted)) work_out(k, which, time, h, k.row(W_Y), k.row(W_NEW), hint, 1.0);
    }
  }
  lanes[L_THETA] = limit;
  for (unsigned flags = bits(good & (lanes[L_SAMPLE_TIME] <= limit)); flags; flags &= flags - 1) {
    int l = __builtin_ctz(flags); int64_t point = d.whose[l], j = int64_t(lane(lanes, L_SAMPLE, l)); double wanted = lane(lanes, L_SAMPLE_TIME, l);
    for (; wanted <= lane(lanes, L_THETA, l); ++j, wanted = j < d.n_times ? d.times[point * d.n_times + j] : INFINITY)
      capture(k, l, d.samples + n * (point * d.n_times + j), std::fmin(1.0, std::fmax(0.0, (wanted - lane(lanes, L_TIME, l)) * (1.0 / lane(lanes, L_STEP, l)))));
    lane(lanes, L_SAMPLE, l) = double(j); lane(lanes, L_SAMPLE_TIME, l) = wanted;
  }
}
static bool begin_segment(const K& k, const Door& d, int l) {
  TABLES V* lanes = k.row(W_LANE); int64_t length = s[BLOCK_LENGTH], point = d.whose[l]; double time = lane(lanes, L_TIME, l);
  for (int64_t segment = int64_t(lane(lanes, L_SEGMENT, l)) + 1; segment < d.segments; ++segment) {
    const double* source = d.blocks + length * (point * d.segments + segment); double end = source[T_END];
    if (source[JACKET_SET] > 0.5) lane(k.row(W_Y), s[N_STATES] + 1, l) = source[JACKET_START];
    if (end <= time) continue;
    for (int64_t q = 0; q < length; ++q) lane(block, q, l) = source[q];
    for (int64_t j = 0, first = s[BLOCK_HEAT], terms = s[HEAT_TERMS]; j < s[N_REACTIONS]; ++j) {
      double heat = 0.0; for (int64_t q = first + (j + 1) * terms - 1; q >= first + j * terms; --q) heat = heat * REFERENCE + source[q];
      lane(k.row(W_REFERENCE), j, l) = heat;
    }
    double brought = 0.0; for (int q = 4; q > 0; --q) brought = (brought + source[FEED_CP + q - 1] / q) * REFERENCE;
    lane(lanes, L_BROUGHT, l) = source[FEED_HEAT] - brought; lane(lanes, L_SEGMENT, l) = double(segment); lane(lanes, L_SEGMENT_END, l) = end;
    lane(lanes, L_STEP, l) = std::fmin(std::fmax(0.25 * lane(lanes, L_GOOD_STEP, l), (end - time) * 1e-3), 0.5 * (end - time));
    lane(lanes, L_PENDING, l) = 0.0; lane(lanes, L_GOOD_STEP, l) = 0.0;
    return false;
  }
  return true;
}
static bool begin_point(const K& k, const Door& d, int l, int64_t point) {
  TABLES V *lanes = k.row(W_LANE), *y = k.row(W_Y); d.whose[l] = point; int64_t n = s[N_ROWS], nz = s[N_STATES]; double reacted = 0.0;
  for (int64_t i = 0; i < n; ++i) { double value = d.starts[point * n + i]; lane(y, i, l) = value; if (i < nz) reacted += f[s[AT_TARGET] + i] * value; }
  for (int64_t q = 0; q < LANE_ROWS; ++q) lane(lanes, q, l) = 0.0;
  for (int64_t q = 0; q < N_CONSTANTS; ++q) lane(lanes, CONSTANTS + q, l) = d.constants[point * N_CONSTANTS + q];
  lane(lanes, L_SEGMENT, l) = -1.0; lane(lanes, L_T_MAX, l) = lane(y, nz, l); lane(lanes, L_REACTED_MAX, l) = reacted;
  for (int q : {L_HEAT_MAX, L_DUTY_MAX, L_RATE_MAX, L_BEST}) lane(lanes, q, l) = -NEVER;
  for (int q : {L_CROSSED, L_BEST_TIME, L_END_TIME}) lane(lanes, q, l) = NAN;
  double end = lane(lanes, L_END_FIXED, l); lane(lanes, L_BATCH_END, l) = std::isnan(end) ? lane(lanes, L_FINAL, l) : end;
  lane(lanes, L_SAMPLE_TIME, l) = d.n_times > 0 ? d.times[point * d.n_times] : INFINITY;
  return begin_segment(k, d, l);
}
static void leave(const K& k, const Door& d, int l) {
  V* lanes = k.row(W_LANE); double* target = d.out + d.whose[l] * d.out_length;
  for (int64_t q = 0; q < LEFT; ++q) { double value = lane(lanes, q, l); target[q] = value <= -NEVER ? NAN : value; }
  for (int64_t i = 0; i < k.s[N_ROWS]; ++i) {
    left(k, d, l, 3)[i] = lane(k.row(W_Y), i, l);
    if (!std::isnan(lane(lanes, L_BEST_TIME, l))) left(k, d, l, 2)[i] = lane(k.row(W_BEST), i, l);
  }
}
extern "C" void twin_march(const int64_t* s, const double* f, const double* blocks, const double* starts, const double* constants, int64_t points, int64_t segments,
                           const double* times, int64_t n_times, double* out, int64_t out_length, double* samples, void* w, int64_t* whose, double tolerance,
                           int64_t most) {
  K k{s, f, (V*)w}; Door d{blocks, starts, constants, times, points, segments, n_times, out_length, most, out, samples, whose};
  V *lanes = k.row(W_LANE), *y = k.row(W_Y), *fresh = k.row(W_NEW); int64_t n = s[N_ROWS], nz = s[N_STATES], following = 0; unsigned running = 0, idle = (1u << LANES) - 1;
  for (int l = 0; l < LANES; ++l) begin_point(k, d, l, points - 1);
  for (;;) {
    for (; idle && following < points; ++following) {
      int l = __builtin_ctz(idle);
      if (begin_point(k, d, l, following)) leave(k, d, l); else { idle &= idle - 1; running |= 1u << l; }
    }
    if (!running) return;
    M live = mask_of(running); V time = lanes[L_TIME], h = lanes[L_STEP];
    start_of_step(k, time); factorise(k, (1.0 / GAMMA) / h); look_back(k, live, time); stages(k, time, h);
    V wrong = error_of_step(k, tolerance), T = fresh[nz]; M fine = (wrong <= 1.0) & (T > 1.0) & (T < lanes[L_TOO_HOT] * 4.0), good = live & fine, rejected = live & ~fine;
    V wanted = next_step(lanes, wrong, fine, h);
    if (bits(good)) { dense_output(k, good); follow(k, d, good, time, h); }
    M too_short, landed = move_on(lanes, good, rejected, time, h, wanted, too_short);
    for (int64_t i = 0; i < n; ++i) y[i] = where(good, fresh[i], y[i]);
    M hot = good & (T > lanes[L_TOO_HOT]), worn = lanes[L_STEPS] + lanes[L_REJECTED] >= double(most);
    for (unsigned flags = bits(live & (hot | landed | too_short | worn)), b_end = bits(landed), b_hot = bits(hot), b_short = bits(too_short); flags; flags &= flags - 1) {
      int l = __builtin_ctz(flags); unsigned one = 1u << l; bool over = false; double& status = lane(lanes, L_STATUS, l);
      if (b_hot & one) { status = RUNAWAY; over = true; }
      else if ((b_end & one) && begin_segment(k, d, l)) over = true;
      else if (lane(lanes, L_STEPS, l) + lane(lanes, L_REJECTED, l) >= double(most)) { status = TOO_MANY_STEPS; over = true; }
      else if ((b_short & one) && !(b_end & one)) { status = STEP_TOO_SMALL; over = true; }
      if (over) { leave(k, d, l); running &= ~one; idle |= one; }
    }
  }
}
