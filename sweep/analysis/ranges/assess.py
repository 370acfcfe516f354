"""Acceptable ranges of a study as one record: the box, what was searched in it, and the ranges of each variable alone beside it."""

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from sweep.analysis.ranges.alone import Alone, alone
from sweep.analysis.ranges.box import Box, Floats, corners
from sweep.analysis.ranges.hunt import Hunt, hunt
from sweep.analysis.ranges.search import Effort, Found, Search
from sweep.base.seeds import stream
from sweep.chance import Assured, Judged, Memory, lower_bound
from sweep.plan import draw
from sweep.plan.draws import cube
from sweep.plan.sides import Side, centre_of, inward, sides_of, stepped, table_of
from sweep.plant import holds, margins
from sweep.study.model import Study
from sweep.study.settings import RangesSettings

Evaluate = Callable[[pd.DataFrame], pd.DataFrame]
NORMAL = 1.959963984540054  # standard deviations on either side that hold 95 % of batches
BEYOND = 0.005  # of an axis, at least, by which a face is moved out to see what ends the box there
WORDS = (
    "Normal operating range: where the plant holds a setting, from its control tolerance. Proven acceptable range: within it every setting, in any "
    "combination with the others' ranges, was found to hold every limit by this model. Design space: all settings that hold; the box is a part of "
    "it, and a setting outside the box may still lie in the design space. Whether any of them is proven for a plant is decided by people, on data."
)


@dataclass(frozen=True)
class Ranges:
    """found: the box, None with `reason`; single: each variable alone; around: the hunt through the box of those; ends (D, 2): which limit
    ends the box down and up, -1 where the variable's range does; fresh: draws that hold and draws in all at the worst setting."""

    study: Study
    settings: RangesSettings
    assured: Assured
    sides: tuple[Side, ...]
    centre: Judged | None
    reason: str | None
    found: Found | None
    single: Alone | None
    around: Hunt | None
    ends: np.ndarray | None
    fresh: tuple[int, int] | None

    def _si(self, box: Box) -> list[tuple[float, float]]:
        ends = zip(box.low.tolist(), box.high.tolist(), self.sides, strict=True)
        return [(min(side.at(low), side.value), max(side.at(high), side.value)) for low, high, side in ends]

    def _point(self, point: Floats) -> dict[str, Any]:
        row = table_of(self.sides, point[None, :]).iloc[0]
        found = {s.name: (float(row[s.name]), s) for s in self.sides}
        return {name: {"value": value, "unit": s.unit, "written": f"{s.shown(value):.5g} {s.own}".strip()} for name, (value, s) in found.items()}

    def _limit(self, number: int) -> str | None:
        return None if number < 0 else self.assured.rows[number].label

    def _smallest(self, seen: Hunt) -> dict[str, Any]:
        """Return the smallest margin of a hunt: where, of which limit, in its own unit."""
        k = seen.worst
        row, margin = self.assured.rows[int(seen.limit[k])], float(seen.margin[k, int(seen.limit[k])])
        return {
            "limit": row.label, "name": row.name, "margin": margin if np.isfinite(margin) else None, "unit": row.unit,
            "at": self._point(seen.points[k]), "share": None if self.assured.draws is None else float(seen.share[k]),
        }  # fmt: skip

    def _line(self, k: int, side: Side) -> dict[str, Any]:
        """Return the ranges of one variable, kept apart."""
        line: dict[str, Any] = {
            "variable": side.name, "unit": side.unit, "set_point": side.value, "set_point_written": side.written(side.value),
            "studied": self._range(side, side.variable.low, side.variable.high), "normal": self._normal(side), "acceptable": None, "alone": None,
        }  # fmt: skip
        if self.found is not None and self.ends is not None:
            low, high = self._si(self.found.box)[k]
            line["acceptable"] = {**self._range(side, low, high), "ended_by": [self._limit(int(end)) for end in self.ends[k]]}
        if self.single is not None:
            low, high = self._si(Box(*inward(self.sides, self.single.box.low, self.single.box.high)))[k]
            line["alone"] = {**self._range(side, low, high), "ended_by": [self._limit(int(end)) for end in self.single.limit[k]]}
        return line

    @staticmethod
    def _range(side: Side, low: float, high: float) -> dict[str, Any]:
        return {"low": low, "high": high, "low_written": side.written(low), "high_written": side.written(high)}

    def _normal(self, side: Side) -> dict[str, Any] | None:
        """Return where the plant holds the set-point: 95 % of a normal tolerance, all of a uniform one."""
        held = side.variable.tolerance
        if held is None:
            return None
        half = half_width(side)
        shown = [f"{side.shown(end):.5g} {side.own}".strip() for end in (side.value - half, side.value + half)]
        return {"low": side.value - half, "high": side.value + half, "low_written": shown[0], "high_written": shown[1],
                "holds": 0.95 if held.distribution == "normal" else 1.0}  # fmt: skip

    def _cautions(self, lines: list[dict[str, Any]]) -> list[str]:
        found = ["The box is the largest that was found; a hunt that finds no counter-example is evidence, not a proof."]
        if self.found is not None and self.found.drawn_in:
            last = "" if not len(self.found.hunt.failing) else " Even so one was found: do not use this box."
            found.append(f"Counter-examples turned up again and again, so that the box was drawn together until none was found.{last}")
        for line in lines:
            normal, box = line["normal"], line["acceptable"]
            if normal and box and (normal["low"] < box["low"] or normal["high"] > box["high"]):
                found.append(f"{line['variable']}: the plant holds it less well than the acceptable range is wide.")
            if box and box["high"] - box["low"] <= 0.0:
                found.append(f"{line['variable']}: there is no room around the set-point; it must be held exactly.")
        p = self.settings.assurance.probability
        if self.fresh is not None and p is not None and lower_bound(*self.fresh, self.settings.assurance.confidence) < p:
            found.append(
                f"With fresh draws the worst setting found does not show the probability {p:g} with a confidence of "
                f"{self.settings.assurance.confidence:g}: more draws would draw the box in."
            )
        return found

    def summary(self) -> dict[str, Any]:
        """Return the block ranges."""
        assurance, found = self.settings.assurance, self.found
        lines = [self._line(k, side) for k, side in enumerate(self.sides)]
        drawn = None
        if assurance.probability is not None:
            drawn = {"probability": assurance.probability, "confidence": assurance.confidence, "draws": self.assured.count, "need": self.assured.need}
        worst = None
        if self.fresh is not None:
            worst = {"holding": self.fresh[0], "draws": self.fresh[1], "probability": self.fresh[0] / self.fresh[1],
                     "low": lower_bound(*self.fresh, assurance.confidence)}  # fmt: skip
        apart = None
        if self.around is not None:
            broken = len(self.around.failing) > 0
            apart = {"holds": not broken, "looked_at": len(self.around.points), "smallest": self._smallest(self.around)}
        return {
            "assurance": drawn, "reason": self.reason, "variables": lines, "share_of_space": None if found is None else found.box.volume,
            "searched": None if found is None else {**found.hunt.counts, "all": len(found.hunt.points), "failing": len(found.hunt.failing)},
            "smallest": None if found is None else self._smallest(found.hunt), "worst_setting": worst, "alone_together": apart,
            "marches": self.assured.marches, "words": WORDS, "cautions": self._cautions(lines) if self.reason is None else [],
        }  # fmt: skip

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return the ranges, and the corners of the box with every margin."""
        rows = []
        for line in self.summary()["variables"]:
            ends = [(line[name] or {}).get(end) for name in ("studied", "normal", "acceptable", "alone") for end in ("low", "high")]
            limits = [(line["acceptable"] or {}).get("ended_by", [None, None])[k] for k in (0, 1)]
            rows.append((line["variable"], line["unit"], line["set_point"], *ends, *limits))
        columns = [f"{name}_{end}" for name in ("studied", "normal", "acceptable", "alone") for end in ("low", "high")]
        table = pd.DataFrame(rows, columns=["variable", "unit", "set_point", *columns, "ended_below_by", "ended_above_by"])
        return {"ranges": table} if self.found is None else {"ranges": table, "ranges_corners": self._corners(self.found)}

    def _corners(self, found: Found) -> pd.DataFrame:
        count = len(corners(len(self.sides)))
        table = table_of(self.sides, found.hunt.points[:count])
        for k, row in enumerate(self.assured.rows):
            table[f"margin_{row.label}"] = found.hunt.margin[:count, k]
        return table.assign(share=found.hunt.share[:count])


def assess_ranges(study: Study, evaluate: Evaluate, memory: Memory | None = None) -> Ranges:
    """Return the largest box of acceptable ranges around the set-point, hunted through, and each variable's range alone."""
    settings = study.ranges
    assert settings is not None
    assured = Assured(study, evaluate, settings.assurance, "ranges", memory)
    sides = sides_of(study, settings.variables)

    def without(reason: str, centre: Judged | None = None) -> Ranges:
        return Ranges(study, settings, assured, sides, centre, reason, None, None, None, None, None)

    outside = [s.name for s in sides if not s.variable.low <= s.value <= s.variable.high]
    if outside:
        return without(f"the set-point lies outside the range of {', '.join(outside)}, so that there is nothing around it to search")

    def judge(points: Floats) -> Judged:
        return assured.at(table_of(sides, points))

    centre = centre_of(sides)
    here = judge(centre[None, :])
    if not here.acceptable[0]:
        return without(_why(assured, here), here)
    drawn = assured.draws is not None
    effort = _effort(len(sides), drawn, settings.points)
    core = _core(judge, sides, centre, drawn, study.seed)
    search = Search(judge, centre, core, effort, lambda box, held: Box(*inward(sides, box.low, box.high, (held.low, held.high))), study.seed)
    single = alone(judge, centre, 8 if drawn else 32)
    pool = cube("sobol", 1 << (effort.pool - 1).bit_length(), len(sides), stream(study.seed, "ranges", "pool"))
    found = search.largest(pool)
    around = hunt(judge, Box(*inward(sides, single.box.low, single.box.high)), max(16, effort.points // 4), stream(study.seed, "ranges", "alone"))
    fresh = _fresh(study, evaluate, settings, sides, found) if drawn else None
    return Ranges(study, settings, assured, sides, here, None, found, single, around, _ends(judge, found.box), fresh)


def _core(judge: Callable[[Floats], Judged], sides: tuple[Side, ...], centre: Floats, drawn: bool, seed: int) -> Box:
    """Return what the box has to hold: where the plant holds the set-point if all of that is acceptable, else the set-point itself. With draws,
    which hold the control errors already, the set-point itself."""
    half = np.array([half_width(side) for side in sides])
    low = [stepped(s, s.value - h, 0, math.floor) if h else s.share(s.value) for s, h in zip(sides, half, strict=True)]  # round, outwards
    high = [stepped(s, s.value + h, 0, math.ceil) if h else s.share(s.value) for s, h in zip(sides, half, strict=True)]
    core = Box(np.maximum(low, 0.0), np.minimum(high, 1.0))
    if drawn or not half.any() or len(hunt(judge, core, 16, stream(seed, "ranges", "core")).failing):
        return Box(centre, centre)
    return core


def half_width(side: Side) -> float:
    """Return by how much the plant misses what is set (SI): 95 % of a normal tolerance, all of a uniform one, nothing without one."""
    held = side.variable.tolerance
    if held is None:
        return 0.0
    return held.size * (abs(side.value) if held.relative else 1.0) * (NORMAL if held.distribution == "normal" else 1.0)


def _effort(size: int, drawn: bool, points: int) -> Effort:
    """Return how much is looked at: with draws each point costs hundreds of batches."""
    if drawn:
        return Effort(16 * size, 2, 10, 2 * size + 2, points)
    return Effort(64 * size, 3, 25, 1_000_000, points)


def _why(assured: Assured, here: Judged) -> str:
    """Return why the set-point itself is not acceptable."""
    failing = [row.label for row, margin in zip(assured.rows, here.margin[0], strict=True) if not margin >= 0.0]
    if assured.draws is None:
        return f"the set-point itself does not hold {', '.join(failing)}; there is no range around it to write down"
    named = ", ".join(failing) or "all limits together"
    return (
        f"at the set-point itself all limits do not hold with a probability of {assured.assurance.probability:g} at a confidence of "
        f"{assured.assurance.confidence:g} (in {100.0 * here.share[0]:.3g} % of the draws looked at; in the way: {named}); no range lies around it"
    )


def _ends(judge: Callable[[Floats], Judged], box: Box) -> np.ndarray:
    """Return which limit is met first when each face is moved out a little, (D, 2), down and up; -1 where the variable's own range ends it."""
    size = len(box.low)
    ends = np.full((size, 2), -1)
    spots = np.unique(np.concatenate([corners(size), np.full((1, size), 0.5)]), axis=0)
    for axis in range(size):
        for up in (0, 1):
            room = 1.0 - box.high[axis] if up else box.low[axis]
            if room <= 1e-9:
                continue
            width = float(box.high[axis] - box.low[axis])
            points = np.concatenate([box.at(spots)] * 3)
            depth = np.repeat(np.minimum(room, [BEYOND, max(BEYOND, 0.1 * width), 0.05 + 0.2 * width]), len(spots))
            points[:, axis] = box.high[axis] + depth if up else box.low[axis] - depth
            judged = judge(points)
            least = np.where(judged.acceptable, np.inf, np.arange(len(points)) // len(spots) * 1e6 + judged.least)
            ends[axis, up] = int(judged.limit[int(least.argmin())]) if np.isfinite(least).any() else int(judged.limit[int(judged.least.argmin())])
    return ends


def _fresh(study: Study, evaluate: Evaluate, settings: RangesSettings, sides: tuple[Side, ...], found: Found) -> tuple[int, int]:
    """Return how many of fresh draws hold at the worst setting that the hunt met, and how many were drawn."""
    count = 4 * settings.assurance.draws
    point = table_of(sides, found.hunt.points[found.hunt.worst][None, :]).iloc[0].to_dict()
    whole = {**{v.name: study.values[v.sets[0]] for v in study.variables}, **{str(name): float(value) for name, value in point.items()}}
    drawn = draw(study, count, "latin-hypercube", "ranges", "fresh").at(whole)
    return int(np.count_nonzero(holds(margins(study, evaluate(drawn))))), count
