"""A study file to a Study: sections in the order in which they need each other, then all faults at once."""

import hashlib
import json
import re
import tomllib
from pathlib import Path
from typing import Any

from sweep.base.errors import Fault, StudyError, SweepError
from sweep.study import equipment, questions, substances
from sweep.study.lines import lines_of
from sweep.study.model import Study
from sweep.study.reader import LATER, Reader

_SECTIONS = (
    "study", "species", "reactions", "vessel", "cooling", "recipe", "events", "target", "limits", "variables", "accuracy", "plan",
    "window", "batch_time", "failure",
)  # fmt: skip


def read_study(path: str | Path) -> Study:
    """Return the study in a file; StudyError with every fault, SweepError where the file cannot be read."""
    path = Path(path)
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise SweepError(f"{path} cannot be read as a study: {error}") from error
    return read_text(text, str(path), path.parent)


def read_text(text: str, name: str = "study.toml", folder: Path | None = None) -> Study:
    """Return the study in a text."""
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        line = re.search(r"line (\d+)", str(error))
        fault = Fault(name, int(line[1]) if line else 1, "(file)", str(error), "TOML", "the file cannot be taken apart")
        raise StudyError((fault,)) from None
    reader = Reader(name, lines_of(text))
    for key in data:
        if key in LATER:
            reader.fault(key, f"[{key}]", "a study without it", "not available yet")
    reader.only({k: v for k, v in data.items() if k not in LATER}, "", _SECTIONS)
    study = _assemble(reader, data, text, name, folder or Path())
    if reader.faults or study is None:
        raise StudyError(tuple(reader.faults))
    return study


def _assemble(reader: Reader, data: dict[str, Any], text: str, name: str, folder: Path) -> Study | None:
    head = reader.table(data, "study", "study")
    reader.only(head, "study", ("title", "seed"))
    species = substances.read_species(reader, reader.table(data, "species", "species"))
    names = {s.name for s in species}
    reactions = substances.read_reactions(reader, reader.table(data, "reactions", "reactions"), species)
    equipment.read_vessel(reader, reader.table(data, "vessel", "vessel"))
    kind = equipment.read_cooling(reader, reader.table(data, "cooling", "cooling"))
    recipe = reader.table(data, "recipe", "recipe")
    reader.only(recipe, "recipe", ("batch_time", "turnaround", "charge", "feeds", "phases"))
    if "phases" in recipe:
        reader.fault("recipe.phases", "phases", "a recipe without them", "not available yet")
    charge = equipment.read_charge(reader, reader.table(recipe, "charge", "recipe.charge"), names)
    feeds = equipment.read_feeds(reader, reader.table(recipe, "feeds", "recipe.feeds"), names)
    to_target = recipe.get("batch_time") == "to target"
    if not to_target:
        reader.quantity("recipe.batch_time", recipe.get("batch_time"), "time")
        reader.at_least("recipe.batch_time", 0.0, True, "a batch takes some time")
    reader.quantity("recipe.turnaround", recipe.get("turnaround", "0 s"), "time")
    reader.at_least("recipe.turnaround", 0.0, False, "time does not run backwards")
    accuracy = reader.table(data, "accuracy", "accuracy")
    reader.only(accuracy, "accuracy", ("relative",))
    relative = reader.quantity("accuracy.relative", accuracy.get("relative", 1e-6), "dimensionless")
    if relative is not None and not 1e-12 <= relative <= 1e-2:
        reader.fault("accuracy.relative", f"{relative:g}", "from 1e-12 to 1e-2", "the march is neither exact nor blind")
    events = equipment.read_events(reader, data.get("events", []) if isinstance(data.get("events", []), list) else [])
    target = questions.read_target(reader, data.get("target"), names)
    decomposes = any(r.purpose == "decomposition" for r in reactions)
    limits = questions.read_limits(reader, reader.table(data, "limits", "limits"), names, target, decomposes)
    batch_time = questions.read_batch_time(reader, data.get("batch_time"))
    failure = questions.read_failure(reader, data.get("failure"), limits)
    variables = questions.read_variables(reader, reader.table(data, "variables", "variables"))
    plan = questions.read_plan(reader, data.get("plan"), folder)
    window = questions.read_window(reader, data.get("window"), {v.name for v in variables})
    _consistent(reader, kind, species, reactions, names, target, to_target, charge, feeds)
    if reader.faults:
        return None
    digest = hashlib.sha256(json.dumps(data, sort_keys=True, default=str).encode()).hexdigest()
    return Study(
        Path(name).stem, name, folder, text, digest, str(head.get("title", Path(name).stem)), int(head.get("seed", 0)), species, reactions,
        kind, charge, feeds, events, to_target, target, limits, variables, plan, window, batch_time, failure,
        reader.values, reader.units, reader.dimensions, tuple(reader.warnings),
    )  # fmt: skip


def _consistent(reader: Reader, kind: Any, species: Any, reactions: Any, names: Any, target: Any, to_target: bool, charge: Any, feeds: Any) -> None:
    """Check what no section can see alone."""
    del names
    if kind not in (None, "isothermal"):
        for s in species:
            reader.needed_if(s.heat_capacity is None, f"species.{s.name}.heat_capacity", f"temperature moves under cooling of kind {kind!r}")
        for r in reactions:
            reader.needed(f"reactions.{r.name}.heat.value", f"temperature moves under cooling of kind {kind!r}")
    if to_target and (target is None or "target.conversion" not in reader.values):
        reader.fault("recipe.batch_time", '"to target"', "a [target] with its conversion", "there is no target to run to")
    brought = {*charge.concentrations, *charge.amounts, charge.balance, *(s for f in feeds for s in f.species)}
    if target is not None and target.species not in brought:
        reader.fault("target.species", target.species, "a species that is charged or fed", "the target is never brought in")
    volume, full = reader.values.get("recipe.charge.volume"), reader.values.get("vessel.volume")
    if volume is not None and full is not None and volume > full:
        reader.fault("recipe.charge.volume", f"{volume:g} m3", f"at most {full:g} m3", "the charge does not fit into the vessel")
