"""The page: sections set by the template into one HTML file that needs no network and no script."""

import base64
from collections.abc import Mapping
from functools import lru_cache
from importlib.resources import files

import jinja2
from markupsafe import Markup

from sweep.report import answers, deviations, findings, findings_chance, findings_decisions, record
from sweep.report.blocks import Block, Picture, Section, Table, Words, table
from sweep.report.curves import Absent, Curves, Prepared
from sweep.report.results import Results

PLACES = {"batch": ("batch_profile", "batch_time"), "window": ("window_map", "batch_time_map"), "failure": ("failure_diagram", "failure_path"),
          "risk": ("exceedance",), "sensitivity": ("spread_halved", "variance_shares"),
          "map": ("probability_map",), "ranges": ("acceptable_ranges",), "optimum": ("optimum_front",)}  # fmt: skip


@lru_cache(maxsize=1)
def _template() -> jinja2.Template:
    environment = jinja2.Environment(autoescape=True, undefined=jinja2.StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    return environment.from_string(_packaged("page.html"))


def _packaged(name: str) -> str:
    return files("sweep.report").joinpath(name).read_text(encoding="utf-8")


def _tables(figure: Prepared) -> tuple[Table, ...]:
    """Return the numbers behind a figure as folded tables."""
    if isinstance(figure, Absent):
        return ()
    given = {figure.name: figure.numbers} if isinstance(figure, Curves) else figure.tables
    return tuple(table(frame, f"Numbers of this figure: figures/{name}.csv", f"figures/{name}.csv", thinned=True) for name, frame in given.items())


def picture(figure: Prepared, svg: Mapping[str, bytes]) -> Block:
    """Return a figure as a block, or the sentence that stands in its place."""
    if isinstance(figure, Absent):
        return Words((f"{figure.title}: not drawn. Reason: {figure.why}.",), look="warning")
    coded = base64.b64encode(svg[figure.name]).decode("ascii")
    return Picture(figure.name, figure.title, figure.caption, figure.description, coded, _tables(figure))


def sections(results: Results, drawn: list[Prepared], svg: Mapping[str, bytes]) -> list[Section]:
    """Return the page's sections in their order."""
    placed = {place: [picture(figure, svg) for figure in drawn if figure.name in names] for place, names in PLACES.items()}
    return [
        answers.section(results), findings.batch_time(results, placed["batch"]), findings.window(results, placed["window"]),
        findings.failure(results, placed["failure"]), deviations.section(results), findings_chance.risk(results, placed["risk"]),
        findings_chance.sensitivity(results, placed["sensitivity"]), findings_decisions.chance_map(results, placed["map"]),
        findings_decisions.ranges(results, placed["ranges"]), findings_decisions.optimum(results, placed["optimum"]),
        record.inputs(results), record.not_assessed(results, drawn),
        record.points(results), record.cautions(results), record.versions(results), record.signatures(),
    ]  # fmt: skip


def page(results: Results, drawn: list[Prepared], svg: Mapping[str, bytes]) -> str:
    """Return the report as HTML."""
    study = results.summary.get("study") or {}
    title = str(study.get("title") or study.get("name") or results.manifest.get("study_name") or "Untitled study")
    state = str(results.manifest.get("state", "unknown"))
    return _template().render(
        title=title, name=str(study.get("name") or ""), digest=str(study.get("digest") or "")[:12], complete=state == "complete", state=state,
        sections=sections(results, drawn, svg), style=Markup(_packaged("page.css")),
    )  # fmt: skip
