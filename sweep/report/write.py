"""Figures and report from a results folder: the files are written whole, and the same results give the same bytes."""

from collections.abc import Callable
from pathlib import Path

import pandas as pd

from sweep.base.records import write_whole
from sweep.report import prepare_batch, prepare_chance, prepare_decisions, prepare_failure, prepare_overlay, prepare_window
from sweep.report.curves import Absent, ChanceField, ContourMap, Curves, Facets, Front, Prepared, RangeBars, Rankings
from sweep.report.page import page
from sweep.report.results import Results, read

BATCH = (prepare_batch.profile, prepare_failure.diagram, prepare_overlay.overlay)
ALL: tuple[Callable[[Results], Prepared], ...] = (
    prepare_batch.profile, prepare_batch.productivity, prepare_window.window, prepare_window.contours, prepare_failure.diagram, prepare_failure.path,
    prepare_chance.exceedance, prepare_chance.shares, prepare_chance.halved,
    prepare_decisions.chance_map, prepare_decisions.bars, prepare_decisions.front,
)  # fmt: skip


def _ink(figure: Prepared) -> tuple[bytes, bytes]:
    """Return a figure's SVG and PNG; matplotlib is loaded here, and not before."""
    from sweep.report import draw, draw_chance, draw_curves, draw_decisions, draw_maps

    with draw.style(figure.name):
        if isinstance(figure, Curves):
            sheet = draw_curves.draw(figure)
        elif isinstance(figure, ContourMap):
            sheet = draw_maps.draw_contours(figure)
        elif isinstance(figure, Facets):
            sheet = draw_chance.draw_facets(figure)
        elif isinstance(figure, Rankings):
            sheet = draw_chance.draw_rankings(figure)
        elif isinstance(figure, ChanceField):
            sheet = draw_decisions.draw_chance(figure)
        elif isinstance(figure, RangeBars):
            sheet = draw_decisions.draw_bars(figure)
        elif isinstance(figure, Front):
            sheet = draw_decisions.draw_front(figure)
        else:
            sheet = draw_maps.draw_window(figure)  # type: ignore[arg-type]
        ink = draw.finish(sheet)
    return ink.svg, ink.png


def _numbers(frame: pd.DataFrame) -> str:
    return str(frame.to_csv(index=False, lineterminator="\n", float_format="%.9g"))


def _write(figures: Path, figure: Prepared) -> bytes:
    """Write one figure with its numbers; return its SVG."""
    svg, png = _ink(figure)
    write_whole(figures / f"{figure.name}.svg", svg)
    write_whole(figures / f"{figure.name}.png", png)
    for name, frame in ({figure.name: figure.numbers} if isinstance(figure, Curves) else getattr(figure, "tables", {})).items():
        write_whole(figures / f"{name}.csv", _numbers(frame))
    return svg


def _clear(figures: Path, figure: Absent) -> None:
    """Remove what an earlier report drew under this name: a figure that no longer stands must not be found."""
    for ending in ("svg", "png", "csv"):
        (figures / f"{figure.name}.{ending}").unlink(missing_ok=True)


def _draw(results: Results, wanted: tuple[Callable[[Results], Prepared], ...]) -> tuple[list[Prepared], dict[str, bytes]]:
    figures, drawn, svg = results.folder / "figures", list[Prepared](), dict[str, bytes]()
    for prepare in wanted:
        figure = prepare(results)
        drawn.append(figure)
        if isinstance(figure, Absent):
            _clear(figures, figure)
        else:
            svg[figure.name] = _write(figures, figure)
    return drawn, svg


def make(folder: Path) -> Path:
    """Write figures/ and report.html from a results folder and return the page's path; SweepError where the results cannot be read."""
    results = read(Path(folder))
    drawn, svg = _draw(results, ALL)
    path = results.folder / "report.html"
    write_whole(path, page(results, drawn, svg))
    return path


def batch(folder: Path) -> tuple[Path, ...]:
    """Write the figures of one batch (profile, and failure diagram where its tables are there) and return the paths of their SVG files."""
    results = read(Path(folder), whole=False)
    _, svg = _draw(results, BATCH)
    return tuple(results.folder / "figures" / f"{name}.svg" for name in svg)
