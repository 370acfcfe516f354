"""Ranges, front and probability map, from results to numbers with labels."""

import numpy as np
import pandas as pd

from sweep.report.curves import Absent, ChanceField, Front, RangeBar, RangeBars
from sweep.report.decided import aim_name, aim_scale
from sweep.report.display import pretty
from sweep.report.prepare_window import ground
from sweep.report.results import Results
from sweep.report.wording import plain, words

MAP = ("probability_map", "With what probability every limit holds")
BARS = ("acceptable_ranges", "Ranges of the variables, kept apart")
FRONT = ("optimum_front", "The trade between the two objectives")


def chance_map(results: Results) -> ChanceField | Absent:
    """Return the probability over the window's plane, with the nominal edge."""
    table, why = results.table("probability_map"), results.why_not("probability_map")
    if why or table is None:
        return Absent(*MAP, why or "analyses/probability_map.csv is missing or empty")
    plane = ground(results, table)
    if plane is None:
        return Absent(*MAP, "analyses/probability_map.csv does not span the window's two axes")
    drawn, columns, scales = plane
    wide = table.pivot(index=columns[0], columns=columns[1], values="probability").sort_index().sort_index(axis=1)
    levels = tuple(100.0 * one["probability"] for one in results.block("probability_map")["levels"])
    numbers = {drawn.labels[k]: scales[k].of(table[columns[k]]) for k in (0, 1)}
    numbers |= {f"{name} (%)": 100.0 * table[name].to_numpy(dtype=np.float64) for name in ("probability", "low", "high")}
    caption = (
        f"Contours of the probability that all limits hold, from {results.block('probability_map')['draws']:,} draws, the same at every node. Thick "
        "dashed: the nominal edge, where limits cease to hold at the constants as written; the room from it to a contour is the price of certainty."
    )
    description = "A map of two variables: shaded by the probability that all limits hold, with contours, the nominal edge and the set-point."
    return ChanceField(*MAP, caption, description, drawn, 100.0 * wide.to_numpy(dtype=np.float64), levels, {MAP[0]: pd.DataFrame(numbers)})


def bars(results: Results) -> RangeBars | Absent:
    """Return each variable's ranges as shares of the range studied, with their ends in its own unit."""
    why, found = results.why_not("ranges"), results.block("ranges")
    if why or found.get("reason"):
        return Absent(*BARS, why or str(found["reason"]))
    rows, numbers = list[RangeBar](), list[dict[str, object]]()
    for one in found["variables"]:
        low, high = one["studied"]["low"], one["studied"]["high"]

        def place(value: float, low: float = low, high: float = high) -> float:
            return (value - low) / (high - low)

        given = ("normal", "acceptable", "alone")
        spans = {name: None if one[name] is None else (place(one[name]["low"]), place(one[name]["high"])) for name in given}
        ends = [(pretty(one[name]["low_written"]), pretty(one[name]["high_written"])) for name in ("studied", "acceptable")]
        rows.append(RangeBar(plain(one["variable"]), place(one["set_point"]), spans["normal"], spans["acceptable"] or (0.0, 0.0), spans["alone"],
                             ends[0], ends[1]))  # fmt: skip
        for name in ("studied", "normal", "acceptable", "alone"):
            if one[name] is not None:
                numbers.append({"variable": plain(one["variable"]), "range": name, "from": one[name]["low_written"], "to": one[name]["high_written"]})
    caption = (
        "Each bar spans the range studied. Filled: proven acceptable, in any combination. Outline: acceptable when this variable alone is changed; "
        "those do not hold together where the text says so. Dark: normal operating range, from the control tolerance. Line: set-point."
    )
    description = f"{len(rows)} horizontal bars, one a variable: the acceptable range within the range studied, the set-point as a line."
    return RangeBars(*BARS, caption, description, tuple(rows), {BARS[0]: pd.DataFrame(numbers)})


def front(results: Results) -> Front | Absent:
    """Return the settings that trade one objective against the other."""
    why, found = results.why_not("optimum"), results.block("optimum")
    if why or not found.get("front"):
        return Absent(*FRONT, why or (str(found["reason"]) if found.get("reason") else "the study seeks one objective"))
    aims, values = found["objectives"], np.array([one["objectives"] for one in found["front"]], dtype=np.float64)
    scales = [aim_scale(one, float(np.abs(values[:, k]).max())) for k, one in enumerate(aims)]
    labels = tuple(f"{aim_name(one)}{f' ({scale.unit})' if scale.unit else ''}" for one, scale in zip(aims, scales, strict=True))
    here = found["set_point"]["objectives"]
    point = None if None in here else (scales[0].one(here[0]), scales[1].one(here[1]))
    shown = [scales[k].of(values[:, k]) for k in (0, 1)]
    numbers = pd.DataFrame({labels[0]: shown[0], labels[1]: shown[1]})
    for name in found["front"][0]["inputs"]:
        numbers[plain(name)] = [one["inputs"][name]["written"] for one in found["front"]]
    best = " and ".join(f"{words(one['name'])} {'low' if one['sense'] == 'minimise' else 'high'}" for one in aims)
    caption = f"Each point is a setting that holds every limit and that none betters in both ({best}). Cross: the set-point."
    description = "A scatter of two objectives: the settings of which none betters another in both."
    return Front(*FRONT, caption, description, (labels[0], labels[1]), shown[0], shown[1], point, bool(found["set_point_acceptable"]),
                 {FRONT[0]: numbers})  # fmt: skip
