"""What the figures rest on, in words: inputs as written with their sources, assumptions, what was not assessed, cautions."""

import tomllib
from collections.abc import Iterator, Mapping
from typing import Any

import pandas as pd

from sweep.base.units import show, si_unit
from sweep.study.model import Study

CAUTIONS = (
    "This program screens; it does not approve. A setting that holds every limit here is a proposal for review, not a permission.",
    "Every figure rests on the kinetics and heats given in the study; errors in them are errors here.",
    "Thermal hazards need calorimetric testing and a review by qualified people under local codes.",
    "Emergency relief is not sized here.",
)
_LEFT_OUT = (
    "mass transfer between phases", "solids and their dissolution or precipitation", "imperfect mixing", "heat of crystallisation",
    "pressure and evaporation",
)  # fmt: skip


def cautions(study: Study) -> list[str]:
    """Return the cautions that go with every result."""
    return list(CAUTIONS)


def assumptions(study: Study) -> list[str]:
    """Return what the model takes for granted in this study."""
    found = [
        "The contents are one well-mixed liquid phase; its volume is what was charged and fed, unaffected by reaction.",
        f"The march keeps a relative tolerance of {study.values['accuracy.relative']:g} per step.",
        *_cooling(study),
    ]
    if study.asks_failure:
        settings = study.failure
        feeds = "stop at once" if settings is None or (settings.feeds == "stop" and settings.feeds_stop_after == 0.0) else (
            "run on to their end" if settings.feeds == "run on" else f"stop {settings.feeds_stop_after:g} s later"
        )  # fmt: skip
        wall = "counts" if settings is not None and settings.wall else "is left out (thermal inertia 1)"
        found.append(f"When cooling fails the feeds {feeds}; decomposition, stirrer and losses are left out of MTSR; the vessel's wall {wall}.")
        found.append(
            "A decomposition that does not speed up by 1 % or more has no time to maximum rate: where less than 50 K of rise is left the horizon "
            "stands as a bound, else zero. Close to that boundary the shortest time in a batch can be much shorter than the one shown; read the "
            "adiabatic rise beside it."
        )
        found.append("T_D24 is searched from -50 to 500 degC, on the mixture whose time to maximum rate is shortest.")
    return found


def _cooling(study: Study) -> Iterator[str]:
    words = {
        "adiabatic": "There is no cooling (adiabatic).",
        "isothermal": "The temperature is held at that of the charge; the duty this needs is reported.",
        "duty": "The set-point is held ideally as long as the heat to be removed lies between none and the duty given.",
        "coolant": "Heat flows to a coolant of given temperature.",
        "jacket": "The jacket is well mixed, its outlet at the jacket temperature, without losses of its own.",
    }
    if study.cooling_kind in words:
        yield words[study.cooling_kind]
    if study.cooling_kind == "jacket" and "cooling.gain" not in study.values:
        yield "The jacket has no controller: the coolant flows as written."


def not_assessed(study: Study) -> list[str]:
    """Return what no figure of this study covers."""
    found = [f"Left out by the model: {', '.join(_LEFT_OUT)}."]
    if not study.asks_failure:
        found.append("Cooling failure (MTSR, time to maximum rate, T_D24, criticality class): the study has no [failure].")
    else:
        if not any(r.purpose == "decomposition" for r in study.reactions):
            found.append("Decomposition (time to maximum rate, T_D24, criticality class): no reaction has that purpose.")
        if "failure.mtt" not in study.values:
            found.append("MTT, and with it the criticality class: no mtt is given in [failure].")
    if study.target is None:
        found.append("Conversion, batch time to a target, productivity: the study has no [target].")
    if not study.limits:
        found.append("No limits are written: nothing but the target, if there is one, was judged.")
    if study.window is None:
        found.append("The operating window: the study has no [window].")
    if study.risk is None:
        found.append("Risk, the probability that the limits hold with uncertain inputs: the study has no [risk].")
    if study.sensitivity is None:
        found.append("Sensitivity, which inputs decide: the study has no [sensitivity].")
    if study.ranges is None:
        found.append("Acceptable ranges, within which every limit holds: the study has no [ranges].")
    if study.optimum is None:
        found.append("An optimum, the best setting within the limits: the study has no [optimum].")
    if not study.scenarios:
        found.append("Deviations other than a total loss of cooling: the study has no [scenarios] and no [deviations].")
    return found


def _flat(value: Any, path: str) -> Iterator[tuple[str, Any]]:
    if isinstance(value, dict):
        for key, part in value.items():
            yield from _flat(part, f"{path}.{key}" if path else str(key))
    elif isinstance(value, list) and any(isinstance(part, dict) for part in value):
        for k, part in enumerate(value):
            yield from _flat(part, f"{path}.{k}")
    else:
        yield path, value


def inputs(study: Study, point: Mapping[str, float] | None = None) -> pd.DataFrame:
    """Return every input as it is written, with its SI value where it is a quantity, and its source where one is named.

    point: name (variable or path) -> SI of the batch that was marched; what it sets otherwise than the study stands in the study's place.
    """
    table = _written(study)
    for name, value in (point or {}).items():
        for path in study.paths_of(name):
            if value != study.values[path]:
                said = show(value, study.units.get(path) or si_unit(study.dimensions[path]))
                for column, cell in (("written", said), ("value_si", value), ("source", f"set for this batch: {name}")):
                    table[column] = table[column].mask(table["path"] == path, cell)
    return table


def _written(study: Study) -> pd.DataFrame:
    document = tomllib.loads(study.text)
    sources = {f"reactions.{r.name}": r.source for r in study.reactions if r.source}
    rows = []
    for path, written in _flat(document, ""):
        value = study.values.get(path)
        source = next((s for prefix, s in sources.items() if path.startswith(prefix + ".")), "")
        unit = si_unit(study.dimensions[path]) if path in study.dimensions else ""
        rows.append((path, written if isinstance(written, str) else str(written), value, unit if value is not None else "", source))
    known = {row[0] for row in rows}
    for path in sorted(set(study.values) - known):
        if path.split(".")[0] not in ("events", "limits"):
            unit = si_unit(study.dimensions[path])
            held = path.startswith("variables.")
            source = "what is held is what was chosen, but in draws" if held else "assumed where nothing is written"
            rows.append((path, "default", study.values[path], unit, source))
    return pd.DataFrame(rows, columns=["path", "written", "value_si", "unit_si", "source"])
