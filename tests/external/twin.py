"""A slow twin of the whole program, one batch at a time: any study, written from the definitions (the project's words and balances)
and marched by SciPy. It reads the study's records and nothing else; kinds of cooling are switched by events, not smoothed.
"""

import dataclasses
from collections.abc import Callable
from itertools import pairwise

import numpy as np
from numpy.polynomial import Polynomial
from scipy.integrate import solve_ivp
from scipy.optimize import brentq, minimize_scalar

from sweep.study import Study

R = 8.31446261815324
HOT = 1500.0  # K
CALLS = 400_000  # evaluations of one march; a twin that needs more is stuck


@dataclasses.dataclass
class Lines:
    """A march: pieces (start, end, right-hand side, dense state)."""

    pieces: list[tuple[float, float, Callable, Callable]]

    def at(self, t: float, last: bool = False) -> tuple[Callable, np.ndarray]:
        """Return the right-hand side's `look` and the state at a time; a boundary belongs to what begins there, or `last`."""
        for start, end, look, dense in self.pieces:
            if start <= t and (t < end or (last and t <= end)):
                return look, dense(t)
        start, end, look, dense = self.pieces[-1]
        return look, dense(end)

    def highest(self, of: Callable, until: float = np.inf, grid: int = 200) -> tuple[float, float]:
        """Return the highest of(look, t, state) up to a time, and when."""
        best, when = -np.inf, np.nan
        for start, end, look, dense in self.pieces:
            stop = min(end, until)
            if stop < start:
                continue
            t = np.union1d(np.linspace(start, stop, grid), dense.ts[(dense.ts >= start) & (dense.ts <= stop)])
            y = np.array([of(look, x, dense(x)) for x in t])
            k = int(y.argmax())
            low, high = t[max(k - 1, 0)], t[min(k + 1, t.size - 1)]
            found, place = y[k], t[k]
            if high > low:
                peak = minimize_scalar(lambda x, look=look, dense=dense: -of(look, x, dense(x)), bounds=(low, high), method="bounded",
                                       options={"xatol": 1e-9 * (high - low) + 1e-9})  # fmt: skip
                if -peak.fun > found:
                    found, place = -peak.fun, peak.x
            if found > best:
                best, when = found, place
        return float(best), float(when)


class Twin:
    """One batch of a study at a point (paths or variables to SI)."""

    def __init__(self, study: Study, point: dict[str, float] | None = None, rtol: float = 1e-9) -> None:
        self.study, self.rtol = study, rtol
        v = self.v = dict(study.values)
        for name, value in (point or {}).items():
            for path in next((x.sets for x in study.variables if x.name == name), (name,)):
                v[path] = value
        self.names = [s.name for s in study.species]
        self.nu = np.array([[r.stoichiometry.get(s, 0.0) for s in self.names] for r in study.reactions]).reshape(-1, len(self.names))
        self.cp = np.array([self._cp(s) for s in study.species])
        self.reactions = [self._reaction(j) for j in range(len(study.reactions))]
        self.synthesis = np.array([r.purpose == "synthesis" for r in study.reactions])
        self._brought()

    def _cp(self, s) -> np.ndarray:
        path = f"species.{s.name}.heat_capacity"
        return np.array([self.v[path], 0, 0, 0]) if path in self.v else np.array(s.heat_capacity or (0, 0, 0, 0), dtype=float)

    def _reaction(self, j: int) -> dict:
        r, v = self.study.reactions[j], self.v
        p = f"reactions.{r.name}"
        delta = Polynomial(self.nu[j] @ self.cp)
        dH, at = delta.integ(), v.get(f"{p}.heat.at", 298.15)
        heat = Polynomial([v.get(f"{p}.heat.value", 0.0)]) + dH - dH(at)
        found = {"k": v[f"{p}.rate_constant.value"], "E": v.get(f"{p}.rate_constant.activation_energy", 0.0),
                 "at": v.get(f"{p}.rate_constant.at", 298.15), "heat": heat, "dH": v.get(f"{p}.heat.value", 0.0)}  # fmt: skip
        orders = np.array([r.orders.get(s, 0.0) for s in self.names])
        found["orders"], found["used"] = orders, (self.nu[j] < 0) & (orders < 1)
        if r.reversible:
            T0, K0 = v.get(f"{p}.equilibrium_constant.at", 298.15), v[f"{p}.equilibrium_constant.value"]
            c = heat.coef
            rest = Polynomial(c[2:]).integ() if c.size > 2 else Polynomial([0.0])

            def ln_K(T, K0=K0, T0=T0, c=c, rest=rest):
                a1 = c[1] if c.size > 1 else 0.0
                return np.log(K0) + (-c[0] * (1 / T - 1 / T0) + a1 * np.log(T / T0) + rest(T) - rest(T0)) / R

            found["ln_K"], found["back"] = ln_K, orders + self.nu[j]
        return found

    def _brought(self) -> None:
        v, study, count = self.v, self.study, len(self.names)
        own = [v.get(f"species.{s}.molar_mass", np.nan) / v.get(f"species.{s}.density", np.nan) for s in self.names]
        charge, at = study.charge, "recipe.charge"
        n = np.zeros(count)
        for s in charge.amounts:
            n[self.names.index(s)] = v[f"{at}.amount.{s}"]
        V = v.get(f"{at}.volume", sum(n[self.names.index(s)] * own[self.names.index(s)] for s in charge.amounts))
        for s in charge.concentrations:
            n[self.names.index(s)] = v[f"{at}.concentration.{s}"] * V
        if charge.balance:
            b = self.names.index(charge.balance)
            n[b] = (V - sum(n[i] * own[i] for i in range(count) if n[i])) / own[b]
        fixed, self.feeds = n.copy(), []
        for feed in study.feeds:
            for s in feed.species:
                if s not in feed.equivalents:
                    fixed[self.names.index(s)] += v[f"recipe.feeds.{feed.name}.amount.{s}"]
        for feed in study.feeds:
            p, F = f"recipe.feeds.{feed.name}", np.zeros(count)
            for s in feed.species:
                i = self.names.index(s)
                of = feed.equivalents.get(s)
                F[i] = v[f"{p}.amount.{s}.equivalents"] * fixed[self.names.index(of)] if of else v[f"{p}.amount.{s}"]
            start = v[f"{p}.start"]
            volume, T = sum(F[i] * own[i] for i in range(count) if F[i]), v.get(f"{p}.temperature", v[f"{at}.temperature"])
            self.feeds.append((start, start + v[f"{p}.duration"], F, T, volume))
        self.charged, self.V0 = n, V
        self.total = n + sum((f[2] for f in self.feeds), np.zeros(count))
        self.last_feed = max((f[1] for f in self.feeds), default=0.0)
        self.scale = self.total[[i for i, s in enumerate(study.species) if s.role != "solvent"]].sum()

    def fed(self, t: float) -> tuple[np.ndarray, float]:
        """Return what is brought in by t (mol) and the volume (m3)."""
        share = [min(max((t - f[0]) / (f[1] - f[0]), 0.0), 1.0) for f in self.feeds]
        return self.charged + sum((s * f[2] for s, f in zip(share, self.feeds, strict=True)), np.zeros(len(self.names))), self.V0 + sum(
            s * f[4] for s, f in zip(share, self.feeds, strict=True)
        )

    def capacity(self, n: np.ndarray, T: float, wall: float) -> float:
        """Return J/K of contents and wall."""
        return float(n @ (self.cp @ [1.0, T, T * T, T**3])) + wall

    def rates(self, n: np.ndarray, V: float, T: float, running: np.ndarray) -> np.ndarray:
        """Return mol/s of each reaction."""
        c = np.maximum(n / V, 0.0)
        r, tiny = np.zeros(len(self.reactions)), 1e-11 * self.scale / self.V0
        for j, x in enumerate(self.reactions):
            if running[j]:
                k = x["k"] * np.exp(-x["E"] / R * (1 / T - 1 / x["at"]))
                stop = np.prod((c / (c + tiny))[x["used"]])  # orders below one stop when the reactant is gone
                r[j] = k * stop * np.prod(c ** x["orders"])
                if "ln_K" in x:
                    r[j] -= k * np.exp(-x["ln_K"](T)) * np.prod(c ** x["back"])
        return r * V

    def heat_of(self, r: np.ndarray, T: float) -> float:
        """Return W given off."""
        return -sum(r[j] * x["heat"](T) for j, x in enumerate(self.reactions) if r[j])

    def settings(self, t: float) -> tuple[str, dict[str, float]]:
        """Return the kind of cooling and the quantities from t on; the later event wins."""
        v, kind = dict(self.v), self.study.cooling_kind or "isothermal"
        timed = sorted(((self.v.get(f"events.{k}.time", e.time), k, e) for k, e in enumerate(self.study.events)), key=lambda x: x[:2])
        for time, k, e in timed:
            if time <= t:
                for path, value in e.sets.items():
                    if path == "cooling.kind":
                        kind = str(value)
                    else:
                        v[path] = self.v.get(f"events.{k}.set.{path}", value)
        return kind, v

    def _right_side(self, start: float, end: float, kind: str, v: dict, running: np.ndarray, cooled: bool, wall: float, feeding: bool = True):
        """Return look(t, y, mode) -> (dy/dt, heat, duty, needed) of a stretch; y: n, T, Tj, integral."""
        middle, I = 0.5 * (start + end), len(self.names)
        on = [f for f in self.feeds if f[0] <= middle < f[1]] if feeding else []
        fixed = self.fed(start)[1]
        full, bottom = v.get("vessel.area.full", 0.0), v.get("vessel.area.bottom", 0.0)
        ratio = (full - bottom) / v.get("vessel.area.at_volume", 1.0)
        ceiling = v.get("vessel.stirrer_power", 0.0)
        lost, ambient = v.get("vessel.heat_loss.UA", 0.0), v.get("vessel.heat_loss.ambient", 0.0)

        def look(t, y, mode="free"):
            n, T, Tj, integral = y[:I], y[I], y[I + 1], y[I + 2]
            V = self.fed(t)[1] if feeding else fixed
            r = self.rates(n, V, T, running)
            heat = self.heat_of(r, T)
            dn = r @ self.nu if r.size else np.zeros(I)
            gained = heat
            for f in on:
                F = f[2] / (f[1] - f[0])
                dn = dn + F
                gained -= sum(Fi * Polynomial(c).integ()(T) - Fi * Polynomial(c).integ()(f[3]) for Fi, c in zip(F, self.cp, strict=True) if Fi)
            C, dTj, dI, duty = self.capacity(n, T, wall), 0.0, 0.0, 0.0
            if cooled:
                gained += ceiling - lost * (T - ambient)
            UA = v.get("vessel.U", 0.0) * (v["vessel.area"] if "vessel.area" in v else bottom + ratio * V)
            if not cooled or kind == "adiabatic":
                duty = 0.0
            elif kind == "isothermal":
                duty = gained
            elif kind == "duty":
                duty = {"off": 0.0, "hold": gained, "full": v["cooling.duty"]}[mode]
            elif kind == "coolant":
                duty = UA * (T - v["cooling.temperature"])
            else:
                duty, opening = UA * (T - Tj), 1.0
                if "cooling.gain" in v and "cooling.set_point" in v:
                    e = T - v["cooling.set_point"]
                    reset = v.get("cooling.reset_time", np.inf)
                    u = v["cooling.gain"] * (e + integral / reset)
                    opening = min(max(u, 0.0), 1.0)
                    beyond = max(u - 1.0, -u, 0.0)
                    dI = e * max(1.0 - beyond / 1e-4, 0.0) if np.isfinite(reset) else 0.0
                mass = v["cooling.coolant.density"] * v["cooling.hold_up"]
                flow = v["cooling.coolant.density"] * opening * v["cooling.flow"]
                dTj = flow / mass * (v["cooling.inlet"] - Tj) + duty / (mass * v["cooling.coolant.heat_capacity"])
            dT = 0.0 if cooled and (kind == "isothermal" or mode == "hold") else (gained - duty) / C
            return np.concatenate([dn, [dT, dTj, dI]]), heat, duty, gained

        return look

    def _solve(self, look, start, end, y, mode="free", events=()):
        calls = [0]

        def f(t, y):
            calls[0] += 1
            if calls[0] > CALLS:
                raise AssertionError("the twin is stuck")
            return look(t, y, mode)[0]

        atol = np.full(y.size, 1e-12 * self.scale)
        atol[len(self.names) :] = 1e-9
        done = solve_ivp(f, (start, end), y, "LSODA", rtol=self.rtol, atol=atol, dense_output=True, events=list(events))
        assert done.success, done.message
        return done

    def march(self, until: float) -> Lines:
        """March the batch as the recipe has it to a time."""
        I, v = len(self.names), self.v
        T0 = v["recipe.charge.temperature"]
        events = [self.v.get(f"events.{k}.time", e.time) for k, e in enumerate(self.study.events)]
        cuts = sorted({0.0, until, *(x for f in self.feeds for x in f[:2] if 0 < x < until), *(x for x in events if 0 < x < until)})
        y, was, pieces = np.concatenate([self.charged, [T0, T0, 0.0]]), "", []
        running = np.ones(len(self.reactions), dtype=bool)
        for start, end in pairwise(cuts):
            kind, here = self.settings(start)
            if kind == "jacket" and was != "jacket":
                y = y.copy()
                y[I + 1] = here.get("cooling.start", T0)
            look = self._right_side(start, end, kind, here, running, True, here.get("vessel.heat_capacity", 0.0))
            y, done = self._stretch(look, start, end, y, kind, here)
            pieces += done
            was = kind
        return Lines(pieces)

    def _stretch(self, look, start, end, y, kind, v):
        if kind != "duty":
            done = self._solve(look, start, end, y)
            return done.y[:, -1], [(start, end, look, _Dense(done))]
        I, pieces, t = len(self.names), [], start
        set_point, most = v["cooling.set_point"], v["cooling.duty"]
        needed = look(t, y, "off")[3]
        held = "off" if needed < 0 else "hold" if needed <= most else "full"
        mode = "full" if y[I] > set_point + 1e-9 else "off" if y[I] < set_point - 1e-9 else held
        for _ in range(200):
            def gap(t, y):
                return y[I] - set_point
            def over(t, y):
                return look(t, y, "off")[3] - most
            def under(t, y):
                return look(t, y, "off")[3]
            gap.terminal = over.terminal = under.terminal = True
            gap.direction, over.direction, under.direction = (1 if mode == "off" else -1), 1, -1
            done = self._solve(look, t, end, y, mode, (over, under) if mode == "hold" else (gap,))
            mine = (lambda m: lambda t, y: look(t, y, m))(mode)
            pieces.append((t, done.t[-1], mine, _Dense(done)))
            t, y = done.t[-1], done.y[:, -1].copy()
            if done.status == 0:
                return y, pieces
            y[I] = set_point
            needed = look(t, y, "off")[3]
            from_hold = "full" if done.t_events[0].size else "off"
            mode = from_hold if mode == "hold" else "full" if needed > most else "off" if needed < 0 else "hold"
        raise AssertionError("the twin chatters")

    def conversion(self, t, y):
        """Return the conversion of the target species at a time and state."""
        k = self.names.index(self.study.target.species)
        return (self.fed(t)[0][k] - y[k]) / self.total[k]

    def left(self, n: np.ndarray, purpose: bool = True) -> tuple[float, np.ndarray]:
        """Return the heat (J) of complete synthesis of n, greedily by falling heat, and what is left."""
        n, heat = np.maximum(np.array(n), 0.0), 0.0
        order = sorted((j for j in range(len(self.reactions)) if self.synthesis[j] == purpose), key=lambda j: self.reactions[j]["dH"])
        for _ in range(100):
            moved = 0.0
            for j in order:
                used = self.nu[j] < 0
                extent = (n[used] / -self.nu[j][used]).min() if used.any() else 0.0
                n, heat, moved = n + extent * self.nu[j], heat - extent * self.reactions[j]["dH"], max(moved, extent)
            if moved < 1e-13 * self.scale:
                break
        return heat, n

    def accumulation(self, t, y):
        """Return the heat still to come over the heat of the whole batch."""
        return self.left(y[: len(self.names)])[0] / self.left(self.total)[0]

    def _adiabatic(self, t, y, until, running, stop_feeds, wall, events=()):
        """March without cooling from t to `until`; feeds run to `stop_feeds` (absolute, s)."""
        I = len(self.names)
        cuts = sorted({t, until, *(x for f in self.feeds for x in (*f[:2], stop_feeds) if t < x < until and x <= stop_feeds)})
        pieces = []
        for start, end in pairwise(cuts):
            feeding = start < stop_feeds
            at = start if feeding else max(stop_feeds, t)
            look = self._right_side(at, end if feeding else at, "adiabatic", self.v, running, False, wall, feeding)

            def hot(t, y):
                return y[I] - HOT
            hot.terminal = True
            done = self._solve(look, start, end, y, "free", (hot, *events))
            pieces.append((start, done.t[-1], look, _Dense(done)))
            y = done.y[:, -1]
            if done.status == 1:
                break
        return Lines(pieces), y

    def stop_of(self, t):
        """Return when feeds stop if cooling fails at t."""
        s = self.study.failure
        if s is None:
            return t
        return max(self.last_feed, t) if s.feeds == "run on" else min(t + s.feeds_stop_after, max(self.last_feed, t))

    @property
    def wall(self):
        """Return the wall that follows the contents after a failure (J/K)."""
        return self.v.get("vessel.heat_capacity", 0.0) if self.study.failure and self.study.failure.wall else 0.0

    def mtsr(self, t, y):
        """Return MTSR (K), the state and volume there."""
        y = y.copy()
        stop, I = self.stop_of(t), len(self.names)
        lines, last = self._adiabatic(t, y, t + 1e9, self.synthesis, stop, self.wall)
        top, when = lines.highest(lambda look, t, y: y[I], grid=20)
        if top - last[I] < 0.01:
            when, state = t + 1e9, last
        else:
            state = lines.at(when, True)[1]
        return top, np.concatenate([state[:I], [top, top, 0.0]]), self.fed(min(when, stop))[1]

    def tmr(self, state, V, T=None):
        """Return TMRad (s) and whether it is censored."""
        I, horizon = len(self.names), self.v["failure.horizon"]
        y = state.copy()
        if T is not None:
            y[I], horizon = T, 20 * 86400.0
        look = lambda t, y, mode="free": self._still(V, y)  # noqa: E731

        def hot(t, y):
            return y[I] - HOT
        hot.terminal = True
        done = self._solve(look, 0.0, horizon, y, "free", (hot,))
        lines = Lines([(0.0, done.t[-1], look, _Dense(done))])
        top, when = lines.highest(lambda look, t, y: look(t, y)[0][I], grid=20)
        first, last = look(0.0, y)[0][I], look(done.t[-1], done.y[:, -1])[0][I]
        rise = self.left(y[:I], False)[0] / self.capacity(y[:I], y[I], self.wall)
        if done.status == 0 and (rise < 0.01 or top <= 0 or last >= top * (1 - 1e-9)):
            return horizon, True
        if top <= 1.01 * first or when <= 0:
            return (horizon, True) if rise < 50.0 else (0.0, False)
        return when, False

    def _still(self, V, y):
        """Evaluate a mixture without feeds at a volume of its own."""
        n, T = y[: len(self.names)], y[len(self.names)]
        r = self.rates(n, V, T, ~self.synthesis)
        heat = self.heat_of(r, T)
        return np.concatenate([r @ self.nu, [heat / self.capacity(n, T, self.wall), 0.0, 0.0]]), heat, 0.0, heat

    def td24(self, state, V):
        """Return T_D24 (K) of a mixture."""
        return brentq(lambda T: np.log(max(self.tmr(state, V, T)[0], 1.0) / 86400.0), 280.0, 520.0, xtol=1e-4)


class _Dense:
    """A solution's dense output."""

    def __init__(self, done) -> None:
        self.sol, self.ts = done.sol, done.t

    def __call__(self, t: float) -> np.ndarray:
        return self.sol(t)
