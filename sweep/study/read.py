"""Reading a study: text to a validated Study, or all its faults at once."""

import re
import tomllib
from pathlib import Path
from typing import Any

from sweep.base.errors import Fault, StudyError
from sweep.base.records import digest
from sweep.study import batch, checks, decisions, doubts, equipment, events, question, scenarios, substances, uncertain
from sweep.study.lines import lines_of
from sweep.study.model import FAILURE, Study, Uncertain
from sweep.study.reader import Reader

_SECTIONS = ("study", "species", "reactions", "vessel", "cooling", "recipe", "events", "target", "limits", "variables",
             "accuracy", "plan", "window", "batch_time", "failure", "scenarios", "deviations", "uncertain", "correlations", "risk",
             "sensitivity", "ranges", "optimum")  # fmt: skip
_LARGEST_FILE = 4_000_000  # characters


def read_study(path: str | Path) -> Study:
    """Return the study in a file; StudyError with every fault in it, or where it cannot be read."""
    file = Path(path)
    try:
        with open(file, "rb") as stream:
            text = stream.read(4 * _LARGEST_FILE + 1).decode("utf-8")  # some files never end
    except UnicodeDecodeError as error:
        raise _single(str(path), 1, "file", f"a byte {error.object[error.start]:#x}", "text in UTF-8", "a study is a text file") from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise _single(str(path), 1, "file", reason, "a study file that can be read", "there is nothing to compute") from None
    return read_text(text, str(path), file.parent)


def read_text(text: str, name: str = "study.toml", folder: Path | None = None) -> Study:
    """Return the study in a text; `name` stands in messages, a list plan is looked for in `folder`."""
    document = _document(text.replace("\r\n", "\n"), name)
    reader = Reader(name, lines_of(text.replace("\r\n", "\n")))
    study = _read(reader, document, text, Path(name).stem, folder or Path())
    if reader.faults:
        raise StudyError(tuple(sorted(dict.fromkeys(reader.faults), key=lambda f: f.line)))
    assert study is not None
    return study


def _single(file: str, line: int, key: str, found: str, expected: str, because: str) -> StudyError:
    return StudyError((Fault(file, line, key, found, expected, because),))


def _document(text: str, name: str) -> dict[str, Any]:
    if len(text) > _LARGEST_FILE:
        raise _single(name, 1, "file", f"{len(text)} characters", f"at most {_LARGEST_FILE}", "a study is written by hand")
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        place = re.search(r"at line (\d+)", str(error))
        line = int(place[1]) if place else text.count("\n") + 1
        lines = text.split("\n")
        found = lines[line - 1].strip() if line <= len(lines) else ""
        raise _single(name, line, "syntax", repr(found), 'TOML, such as key = "value"', str(error)) from None
    except (RecursionError, ValueError):
        raise _single(name, 1, "syntax", "nested too deep, or a number too long", "a plain TOML file", "it cannot be read") from None


def _read(reader: Reader, document: dict[str, Any], text: str, name: str, folder: Path) -> Study | None:
    reader.only(document, "", _SECTIONS)
    part = {key: reader.table(document, key, key) for key in _SECTIONS if key not in ("events", "correlations")}

    def given(key: str) -> dict[str, Any] | None:
        return part[key] if key in document else None

    title, seed = _head(reader, part["study"], name)
    species = substances.read_species(reader, part["species"])
    names = {s.name for s in species}
    reactions = substances.read_reactions(reader, part["reactions"], species)
    equipment.read_vessel(reader, part["vessel"])
    heats = any(f"reactions.{r.name}.heat.value" in reader.values for r in reactions)
    first = str(part["cooling"].get("kind", "isothermal"))
    deviations = scenarios.with_usual(reader, document, species, reactions, first, document)
    kinds = events.kinds_set(events.set_tables(document.get("events", []))) | scenarios.kinds_of(deviations)
    kind = equipment.read_cooling(reader, given("cooling"), kinds, heats)
    charge, feeds, to_target = batch.read_recipe(reader, part["recipe"], names)
    can = events.settable(reader, reactions, feeds)
    happens = events.EventReader(reader, names, can).read(document.get("events", []), "events")
    brought = {*charge.amounts, *charge.concentrations, charge.balance, *(s for f in feeds for s in f.species)}
    target = question.read_target(reader, given("target"), names, {s for s in brought if s})
    if to_target and target is None:
        reader.needed("target.conversion", 'a batch "to target" has a target')
    _accuracy(reader, part["accuracy"])
    failure = question.read_failure(reader, given("failure"))
    batch_time = question.read_batch_time(reader, given("batch_time"))
    named = scenarios.Responses(question.columns_of(reader, species, target))
    deviating = scenarios.ScenarioReader(reader, names, can, feeds).read(deviations, named)
    limits = question.read_limits(reader, part["limits"], species, target, {s.name for s in deviating})
    deviating = question.asked_of(deviating, limits)
    variables = question.read_variables(reader, part["variables"])
    reader.swept = {path for v in variables for path in v.sets}
    plan = question.read_plan(reader, given("plan"), variables, folder)
    window = question.read_window(reader, given("window"), variables)
    inputs = uncertain.read_uncertain(reader, part["uncertain"], variables, question.TAKEN, folder)
    correlations = uncertain.read_correlations(reader, document.get("correlations", []), inputs)
    drawn = bool(inputs) or any(v.tolerance is not None for v in variables)
    risk = uncertain.read_risk(reader, given("risk"), drawn)
    sensitivity = uncertain.read_sensitivity(reader, given("sensitivity"), drawn, variables)
    chance_map = decisions.read_map(reader, given("risk"), window, drawn)
    ranges = decisions.read_ranges(reader, given("ranges"), variables, drawn)
    optimum = decisions.read_optimum(reader, given("optimum"), variables, species, target, limits, drawn)
    asked = (*(limit.name for limit in limits), *(one.name for one in (optimum.objectives if optimum else ())))
    asks_failure = failure is not None or any(name in FAILURE for name in asked)
    asks_any = asks_failure or any(s.asks_failure for s in deviating)
    isothermal = {kind, *kinds} == {"isothermal"} and not asks_any
    why = "cooling failure needs an energy balance" if asks_any else f"a cooling of kind {kind} needs an energy balance"
    checks.check_thermal(reader, species, reactions, isothermal, why)
    checks.check_equilibria(reader, reactions)
    checks.check_limits(reader, limits, reactions, target, optimum.objectives if optimum else ())
    for several in (happens, *(s.events for s in deviating)):
        checks.check_conditions(reader, several, reactions, target, {kind, *kinds})
    checks.check_heat_capacities(reader, species, variables)
    checks.check_fill(reader, charge, feeds, variables, target)
    if reader.faults:
        return None
    doubts.warn_ranges(reader, reactions, variables)
    doubts.warn_jacket(reader, kind, reactions, charge, feeds)
    doubts.warn_recipe(reader, happens, feeds, to_target)
    doubts.warn_optimum(reader, optimum, variables, to_target)
    doubts.warn_heat_capacities(reader, species)
    doubts.warn_rates(reader, reactions, not isothermal or "recipe.charge.temperature" in reader.swept)
    return Study(
        name=name, file=reader.file, folder=folder, text=text, digest=_digest(document, inputs), title=title, seed=seed, species=species,
        reactions=reactions, cooling_kind=kind, charge=charge, feeds=feeds, events=happens, batch_to_target=to_target,
        target=target, limits=limits, variables=variables, plan=plan, window=window, batch_time=batch_time, failure=failure,
        values=reader.values, units=reader.units, dimensions=reader.dimensions, bounds=reader.bounds, asks_failure=asks_failure,
        warnings=tuple(reader.warnings), scenarios=deviating, uncertain=inputs, correlations=correlations, risk=risk, sensitivity=sensitivity,
        map=chance_map, ranges=ranges, optimum=optimum,
    )  # fmt: skip


def _digest(document: dict[str, Any], inputs: tuple[Uncertain, ...]) -> str:
    """Return the digest of what a study says, draws in files beside it included."""
    tables = {one.name: one.table for one in inputs if one.table}
    return digest({"study": document, "draws": tables} if tables else document)


def _head(reader: Reader, table: dict[str, Any], name: str) -> tuple[str, int]:
    reader.only(table, "study", ("title", "seed"))
    title, seed = table.get("title", name), table.get("seed", 0)
    if not isinstance(title, str):
        reader.fault("study.title", repr(title), "a text", "it heads the report")
    if not isinstance(seed, int) or isinstance(seed, bool) or not 0 <= seed < 2**63:
        reader.fault("study.seed", repr(seed), "a whole number, zero or above", "it starts the random numbers")
    return title, seed


def _accuracy(reader: Reader, table: dict[str, Any]) -> None:
    reader.only(table, "accuracy", ("relative",))
    if "relative" in table:
        reader.quantity("accuracy.relative", table["relative"], "dimensionless")
    else:
        reader.keep("accuracy.relative", 1e-6, "", "dimensionless")
    value = reader.values.get("accuracy.relative")
    if value is not None and not 1e-12 <= value <= 1e-2:
        reader.fault("accuracy.relative", value, "between 1e-12 and 1e-2", "a march is neither exact nor a guess")
