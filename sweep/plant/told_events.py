"""Events in words, in the study's own units: their cause, and what they set."""

from sweep.base.units import show, si_unit
from sweep.study.model import Change, Event, Scenario, Study

_NAMES = {"n": "amount of", "c": "concentration of"}


def _written(study: Study, path: str) -> str:
    unit = study.units[path] or si_unit(study.dimensions[path])
    return show(study.values[path], unit)


def cause_of(study: Study, event: Event) -> str:
    """Return why an event happens: "at 4 h", "temperature above 75 degC, 2 min later"."""
    when, follows = event.when, f"after {event.after}, " if event.after else ""
    if when is None and event.after:
        delay = f"{event.path}.delay"
        return f"{_written(study, delay)} after {event.after}" if delay in study.values else f"right after {event.after}"
    if when is None and f"{event.path}.time" not in study.values:
        return "from the start"
    if when is None and event.since:
        return f"{_written(study, f'{event.path}.time')} after that" if study.values[f"{event.path}.time"] else "then"
    if when is None:
        return f"at {_written(study, f'{event.path}.time')}"
    name = f"{_NAMES[when.quantity]} {when.species}" if when.species is not None else when.quantity.replace("_", " ")
    later = f", {_written(study, f'{event.path}.delay')} later" if f"{event.path}.delay" in study.values else ""
    again = "" if event.once or event.after else f", again after {_written(study, f'{event.path}.hysteresis')} back"
    return f"{follows}{name} {when.sense} {_written(study, when.path)}{later}{again}"


def set_of(study: Study, scenario: Scenario) -> list[str]:
    """Return in what a scenario deviates, a sentence each."""
    whole = [effect_of(study, Event(None, {path: value}, scenario.path)) for path, value in scenario.sets.items()]
    found = [f"from the start: {', '.join(whole)}"] if whole else []
    timed = any(event.when is None and event.since for event in scenario.events)
    if timed and scenario.worst is not None:
        found.append("at the worst moment")
    elif timed and scenario.feed is not None:
        found.append(f"at the {scenario.edge} of feed {scenario.feed}")
    elif timed:
        found.append(f"at {_written(study, f'{scenario.path}.at')}" if f"{scenario.path}.at" in study.values else "at the start")
    return found + [f"{cause_of(study, event)}: {effect_of(study, event)}" for event in scenario.events]


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
