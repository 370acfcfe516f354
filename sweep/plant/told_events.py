"""Events in words, in the study's own units: their cause, and what they set."""

from sweep.base.units import show, si_unit
from sweep.study.model import Change, Event, Study

_NAMES = {"n": "amount of", "c": "concentration of"}


def _written(study: Study, path: str) -> str:
    unit = study.units[path] or si_unit(study.dimensions[path])
    return show(study.values[path], unit)


def cause_of(study: Study, event: Event) -> str:
    """Return why an event happens: "at 4 h", "temperature above 75 degC, 2 min later"."""
    when = event.when
    if when is None:
        return f"at {_written(study, f'{event.path}.time')}"
    name = f"{_NAMES[when.quantity]} {when.species}" if when.species is not None else when.quantity.replace("_", " ")
    later = f", {_written(study, f'{event.path}.delay')} later" if f"{event.path}.delay" in study.values else ""
    again = "" if event.once else f", again after {_written(study, f'{event.path}.hysteresis')} back"
    return f"{name} {when.sense} {_written(study, when.path)}{later}{again}"


def effect_of(study: Study, event: Event) -> str:
    """Return what an event sets: "cooling.set_point = 60 degC, vessel.U = 0.5 times"."""
    parts = []
    for path, value in event.sets.items():
        place = f"{event.path}.set.{path}"
        if isinstance(value, Change):
            number = _written(study, f"{place}.{value.how}")
            sign = "+" if value.how == "plus" and study.values[f"{place}.plus"] >= 0.0 else ""
            parts.append(f"{path} = {number} times" if value.how == "times" else f"{path} {sign}{number}")
        else:
            parts.append(f"{path} = {value if isinstance(value, str) else _written(study, place)}")
    return ", ".join(parts)
