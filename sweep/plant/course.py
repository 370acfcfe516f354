"""The course a batch takes: its events by condition become times, so that all that follows sees a plain recipe, as it went.

A march with the conditions watched for breaks off at the first one that is met; the event takes its place among those by time, and the
batch marches on from there, until no more is met. N points, C events by condition.
"""

import numpy as np

from sweep.base.status import DONE
from sweep.kernel import layout as at
from sweep.kernel.engine import march
from sweep.kernel.program import Structure, Watch
from sweep.plant import chemistry
from sweep.plant.happenings import Happenings, by_time, settings_at, with_fired
from sweep.plant.onward import cut_segments, passive_constants
from sweep.plant.recipe import Charged, Since, plant_of
from sweep.plant.values import Floats, Values
from sweep.study.model import Condition, Study

MOST_ROUNDS = 200  # events fired, or armed again, in one batch
_FLOWS = {"heat_release": 1, "cooling_duty": 2}


def charge_plant(study: Study, values: Values) -> Charged:
    """Return the arrays with which the kernel marches these points: the recipe as it goes, its events by condition where they fire."""
    happened = by_time(study, values)
    if any(event.time is None for event in study.events):
        happened = _search(study, values, happened)
    return plant_of(study, values, happened)


def _watch(study: Study, structure: Structure, when: Condition, back: bool) -> Watch:
    """Return a condition as the kernel watches for it; back: the quantity has gone back, for the event to be armed again."""
    nz, sign = structure.sources.shape[0], 1.0 if (when.sense == "above") != back else -1.0
    none = (0.0,) * (nz + 2)
    if when.quantity in _FLOWS:
        return Watch(_FLOWS[when.quantity], sign, none)
    if when.quantity == "volume":
        return Watch(0, sign, none, volume=1.0)
    if when.quantity == "conversion":
        return Watch(0, sign, (*structure.target.tolist(), 0.0, 0.0))
    if when.species is not None:
        species = chemistry.names(study).index(when.species)
        return Watch(0, sign, (*structure.amounts[species].tolist(), 0.0, 0.0), species, per_volume=when.quantity == "c")
    return Watch(0, sign, (*none[:nz], 1.0, 0.0) if when.quantity == "temperature" else (*none[:nz], 0.0, 1.0))


class _Search:
    """Events by condition while they are sought. armed, fired (N, C): ready to fire; how often it has; arms (N, C) s: when it will be;
    end (N,) s: when the batch ends as far as is known, NaN where it ends at its target."""

    def __init__(self, study: Study, values: Values, happened: Happenings) -> None:
        self.study, self.values, self.happened = study, values, happened
        self.events = [k for k, event in enumerate(study.events) if event.when is not None]
        structure = chemistry.structure_of(study)
        self.watches = tuple(_watch(study, structure, self._when(c), back) for back in (False, True) for c in range(len(self.events)))
        shape = (values.count, len(self.events))
        waits = np.array([bool(study.events[k].after) for k in self.events], dtype=bool)
        self.armed, self.fired = np.broadcast_to(~waits, shape).copy(), np.zeros((values.count, len(study.events)), dtype=int)
        self.arms, self.end = np.full(shape, np.inf), np.full(values.count, np.nan)
        self.columns: dict[tuple[int, int], int] = {}  # event and how often it fired before -> its column among the happenings
        every = np.arange(values.count)
        for h, k in enumerate(happened.columns):
            self._follow(k, every, happened.when[:, h])

    def _when(self, c: int) -> Condition:
        when = self.study.events[self.events[c]].when
        assert when is not None
        return when

    def levels(self, plant: Charged, rows: np.ndarray) -> Floats:
        """Return what the watches compare with, (M, 2 C), of points `rows`; infinite on the far side where an event is not armed."""
        found = np.zeros((rows.size, len(self.watches)))
        for c, k in enumerate(self.events):
            event, when = self.study.events[k], self._when(c)
            level, side = plant.values.get(when.path), 1.0 if when.sense == "above" else -1.0
            gone_back = level - side * plant.values.get(f"{event.path}.hysteresis")
            if when.quantity == "conversion":
                level, gone_back = (self._reacted(plant, share) for share in (level, gone_back))
            again = (self.fired[rows, k] > 0) & ~self.armed[rows, c] & (not event.once)
            found[:, c] = np.where(self.armed[rows, c], level, side * np.inf)
            found[:, len(self.events) + c] = np.where(again, gone_back, -side * np.inf)
        return found

    def _reacted(self, plant: Charged, conversion: Floats) -> Floats:
        """Return the sum over z that belongs to a conversion, (M,)."""
        assert self.study.target is not None
        whole = plant.brought.total()[:, chemistry.names(self.study).index(self.study.target.species)]
        target = plant.program.structure.target
        return conversion * whole + plant.starts[:, : target.size] @ target

    def arm(self, rows: np.ndarray, time: Floats) -> Floats:
        """Arm, in points `rows` (M,) at times (M,) s, the events whose predecessor has acted; return when the next ones will be (M,)."""
        due = self.arms[rows] <= time[:, None]
        self.armed[rows] |= due
        self.arms[rows] = np.where(due, np.inf, self.arms[rows])
        following: Floats = self.arms[rows].min(axis=1, initial=np.inf)
        return following

    def note(self, rows: np.ndarray, met: np.ndarray, time: Floats) -> None:
        """Note which watch of points `rows` (M,) was met, and when (s)."""
        count = len(self.events)
        back, which = met >= count, met % count
        self.armed[rows, which] = back
        for c in np.unique(which[~back]):
            mine = ~back & (which == c)
            self._fire(self.events[int(c)], rows[mine], time[mine])

    def _fire(self, k: int, rows: np.ndarray, time: Floats) -> None:
        """Put event k among the happenings of points `rows` (M,) at times (M,) s, its delay counted; then what waits for it."""
        before = self.fired[rows, k]
        for times in np.unique(before):
            if (k, int(times)) not in self.columns:
                never = np.full(self.values.count, np.inf)
                self.columns[(k, int(times))] = len(self.happened.columns)
                self.happened = with_fired(self.happened, k, never, never)
        place = np.array([self.columns[(k, int(times))] for times in before], dtype=int)
        acts = time + self.values.get(f"{self.study.events[k].path}.delay")[rows]
        if any(path.endswith(".rate_factor") for path in self.study.events[k].sets):
            acts = np.where(acts > self.end[rows], np.inf, acts)  # a batch that is over takes no more feed, and its end does not move
        self.happened.fired[rows, place] = time
        self.happened.when[rows, place] = acts
        self.fired[rows, k] += 1
        self._follow(k, rows, acts)

    def _follow(self, k: int, rows: np.ndarray, acts: Floats) -> None:
        """Let the events that wait for event k be armed, or act, when it acts."""
        name = self.study.events[k].name
        for other, event in enumerate(self.study.events):
            if not name or event.after != name or event.deviation != self.study.events[k].deviation:
                continue
            if event.when is None:
                self._fire(other, rows, acts)
            else:
                c = self.events.index(other)
                self.arms[rows, c] = np.minimum(self.arms[rows, c], acts)


def _search(study: Study, values: Values, happened: Happenings) -> Happenings:
    """March from one event by condition to the next, every point for itself, until none is met any more."""
    search, tolerance = _Search(study, values, happened), float(study.values.get("accuracy.relative", 1e-6))
    rows, time, state, since = np.arange(values.count), np.zeros(values.count), np.zeros((values.count, 0)), None
    for _ in range(MOST_ROUNDS):
        following = search.arm(rows, time)
        plant = plant_of(study, values.take(rows), search.happened.take(rows), search.watches, since)
        state = state if state.shape[1] else plant.starts
        stop = np.minimum(plant.constants[:, at.T_FINAL], following)
        going = stop > time
        span = np.where(going, stop - time, 1.0)
        every = np.arange(rows.size)
        blocks, constants = cut_segments(plant, every, time, time + span), passive_constants(plant, every, span)
        out = march(plant.program, blocks, state, constants, None, tolerance, levels=search.levels(plant, rows))
        search.end[rows] = plant.constants[:, at.END_FIXED]
        met, done = out.out[:, at.OUT_EVENT].astype(int), out.out[:, at.OUT_STATUS] == DONE
        hit = going & (met >= 0)
        kept = hit | (going & done & (following <= stop))
        reached = np.where(hit, time + out.out[:, at.OUT_TIME], stop)
        rows, time, state, met, hit = rows[kept], reached[kept], out.at_last[kept], met[kept], hit[kept]
        if not rows.size:
            return search.happened
        since = Since(time, settings_at(study, values.take(rows), search.happened.take(rows), time)[1])
        search.note(rows[hit], met[hit], time[hit])
    search.happened.restless[rows] = True
    return search.happened
