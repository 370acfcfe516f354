"""The sections that say what the figures rest on: inputs, assumptions, what was left out, failed points, versions, signatures."""

from typing import Any

import pandas as pd

from sweep.report.answers import setting
from sweep.report.blocks import Block, Cell, Section, Signatures, Table, Text, Words, heads, row, table
from sweep.report.curves import Absent, Prepared
from sweep.report.display import pretty, scale_for
from sweep.report.prepare_window import variable_scale
from sweep.report.results import Results
from sweep.report.wording import plain, sentence, several, split_unit

INPUTS = 400  # rows of inputs on the page: a review reads them all
SCREENS = (
    "This program screens; it does not approve.",
    "Every figure rests on the kinetics, heats and vessel data given; where they are wrong, so are the figures.",
    "Thermal hazards need calorimetric testing and a review by qualified people under local codes.",
    "Emergency relief is not sized here.",
)


def inputs(results: Results) -> Section:
    """Return assumptions and inputs as understood."""
    blocks = list[Block]()
    if assumptions := results.summary.get("assumptions"):
        blocks += [Words(("What the model assumes:", *map(sentence, assumptions)), listed=True)]
    variables = results.block("set_point").get("inputs") or {}
    rows = tuple(row(plain(name), setting(results, name)) for name in variables)
    if rows:
        blocks.append(Table("Variables at the set-point", heads("Variable", "Value"), rows))
    given = results.table("inputs")
    if given is None:
        blocks.append(Words(("The inputs as understood are not listed: analyses/inputs.csv is missing or empty.",), look="warning"))
    else:
        named = {"value_si": "SI value", "si_value": "SI value", "unit_si": "SI unit"}
        if "unit_si" in given:
            given = given.assign(unit_si=given["unit_si"].map(lambda unit: "" if pd.isna(unit) else pretty(str(unit))))
        shown = given.rename(columns=lambda name: named.get(str(name), plain(str(name))))
        blocks.append(table(shown, "Inputs as understood, with their sources", "analyses/inputs.csv", INPUTS, folded=False, digits=6))
    if text := str(results.manifest.get("study") or ""):
        blocks.append(Text("The study file as it was run", text))
    return Section("inputs", "Assumptions and inputs", tuple(blocks))


def _said(text: str, lines: list[str]) -> bool:
    return any(text.lower() in line.lower() for line in lines)


def not_assessed(results: Results, drawn: list[Prepared]) -> Section:
    """Return what was not assessed, and the figures that are missing for it."""
    lines = [sentence(text) for text in results.summary.get("not_assessed") or ()]
    named = (("batch_time", "Batch time"), ("window", "Operating window"), ("failure", "Cooling failure"), ("risk", "Risk"),
             ("sensitivity", "Sensitivity"),
             ("probability_map", "Probability map"), ("ranges", "Acceptable ranges"), ("optimum", "Optimum"))  # fmt: skip
    lines += [line for name, said in named if (why := results.why_not(name)) and not _said(why, lines) and (line := sentence(f"{said}: {why}"))]
    left_out = "Left out by the model: mass transfer between phases, solids, imperfect mixing, heat of crystallisation. Emergency relief: not sized."
    figures = [sentence(f"{figure.title}: {figure.why}") for figure in drawn if isinstance(figure, Absent)]
    lines += [] if _said("Left out by the model", lines) else [left_out]
    blocks: list[Block] = [Words(tuple(lines), listed=True, look="warning")]
    if figures:
        blocks.append(Words(("Figures not drawn, and why:", *figures), listed=True))
    return Section("not-assessed", "What was not assessed", tuple(blocks))


def _failed(results: Results, given: pd.DataFrame) -> Table:
    """Return the failed points, their inputs in the study's own units."""
    known, shown = results.block("set_point").get("inputs") or {}, dict[str, Any]()
    for column in given.columns:
        name, unit = split_unit(str(column))
        numeric = pd.api.types.is_numeric_dtype(given[column])
        scale = variable_scale(results, name) if name in known else scale_for(unit, name, 0.0)
        label = f"{plain(name)} ({scale.unit})" if numeric and scale.unit else plain(name)
        shown[label] = scale.of(given[column]) if numeric else given[column].astype(object).fillna("").to_numpy()
    return table(pd.DataFrame(shown), "Points without a complete answer", "analyses/failed_points.csv", folded=False)


def points(results: Results) -> Section:
    """Return how many points were computed, and those that failed with their reasons."""
    count, given = results.summary.get("points") or {}, results.table("failed_points")
    planned, done, runaway, failed = (count.get(key) or 0 for key in ("planned", "done", "runaway", "failed"))
    said = [f"{several(planned, 'point')} planned, {done} done, {runaway} ran away, {failed} failed."]
    said.append(f"Every limit holds at {several(count['all_hold'], 'point')}." if count.get("all_hold") is not None else "")
    bad = bool(runaway or failed)
    blocks: list[Block] = [Words((" ".join(said).strip(),), look="warning" if bad else "")]
    if given is not None:
        blocks.append(_failed(results, given))
    elif bad:
        blocks.append(Words(("They are not listed: analyses/failed_points.csv is missing or empty.",), look="bad"))
    return Section("points", "Points computed", tuple(blocks))


def cautions(results: Results) -> Section:
    """Return what the reader must bear in mind."""
    own = tuple(map(sentence, results.summary.get("cautions") or ()))
    standing = () if any("does not approve" in said for said in own) else SCREENS
    return Section("cautions", "Cautions", (Words((*standing, *own), listed=True, look="warning"),))


def versions(results: Results) -> Section:
    """Return what was run, by digest and version."""
    study, manifest = results.summary.get("study") or {}, results.manifest
    seed = study.get("seed") if study.get("seed") is not None else manifest.get("seed", "")
    entries = [
        ("Study", str(study.get("name") or manifest.get("study_name") or "")),
        ("Digest of the study", str(study.get("digest") or manifest.get("study_digest") or "")),
        ("Seed", str(seed)),
        ("State of the run", str(manifest.get("state", "unknown"))),
        *((f"Version of {name}", str(found)) for name, found in sorted((manifest.get("versions") or {}).items())),
    ]
    rows = tuple((Cell(name), Cell(text)) for name, text in entries)
    blocks: list[Block] = [Table("What was run", (Cell("Item"), Cell("Value")), rows, "Also in manifest.json.")]
    if study.get("digest") and manifest.get("study_digest") and study["digest"] != manifest["study_digest"]:
        differ = "The digests of the study in summary.json and manifest.json differ: these results do not belong together."
        blocks.insert(0, Words((differ,), look="bad"))
    files = tuple((Cell(name), Cell(str(found))) for name, found in sorted((manifest.get("files") or {}).items()))
    if files:
        note = "Also in manifest.json." if len(files) <= 40 else f"The first 40 of {len(files)}; all in manifest.json."
        blocks.append(Table("Files and their digests", (Cell("File"), Cell("Digest")), files[:40], note, folded=True))
    return Section("versions", "Versions and digests", tuple(blocks))


def signatures() -> Section:
    """Return the lines to sign on."""
    return Section("signatures", "Prepared, reviewed, approved", (Signatures(("Prepared by", "Reviewed by", "Approved by")),))
