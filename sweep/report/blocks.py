"""What the page is made of: text already in words and units; the template only sets it."""

from dataclasses import dataclass, field
from typing import ClassVar

import pandas as pd

from sweep.report.display import number

SHOWN = 40  # rows of a long table on the page; the file beside it holds all


@dataclass(frozen=True)
class Cell:
    """A cell of a table; `look` is "" (words), "number", "good" or "bad"."""

    text: str
    look: str = ""


@dataclass(frozen=True)
class Table:
    """A table with its caption; `folded` ones open on demand."""

    kind: ClassVar[str] = "table"
    caption: str
    head: tuple[Cell, ...]
    rows: tuple[tuple[Cell, ...], ...]
    note: str = ""
    folded: bool = False


@dataclass(frozen=True)
class Words:
    """Sentences: a paragraph each, or a list; `look` is "", "warning" or "bad"."""

    kind: ClassVar[str] = "words"
    sentences: tuple[str, ...]
    listed: bool = False
    look: str = ""


@dataclass(frozen=True)
class Answers:
    """The answers: question, and the lines that answer it."""

    kind: ClassVar[str] = "answers"
    entries: tuple[tuple[str, tuple[str, ...]], ...]


@dataclass(frozen=True)
class Picture:
    """A figure, its SVG in base64, and its numbers."""

    kind: ClassVar[str] = "picture"
    name: str
    title: str
    caption: str
    description: str
    svg: str
    tables: tuple[Table, ...] = ()


@dataclass(frozen=True)
class Text:
    """Text as it was written, such as the study file."""

    kind: ClassVar[str] = "text"
    caption: str
    text: str


@dataclass(frozen=True)
class Signatures:
    """Lines to sign on."""

    kind: ClassVar[str] = "signatures"
    roles: tuple[str, ...]


Block = Table | Words | Answers | Picture | Text | Signatures


@dataclass(frozen=True)
class Section:
    """A part of the page under its heading."""

    name: str
    title: str
    blocks: tuple[Block, ...] = field(default_factory=tuple)


def figure(text: str) -> Cell:
    """Return a cell that stands in a column of numbers."""
    return Cell(text, "number")


def verdict(holds: bool) -> Cell:
    """Return what is said of a limit."""
    return Cell("holds", "good") if holds else Cell("does not hold", "bad")


def row(first: str, *texts: str) -> tuple[Cell, ...]:
    """Return a row of words, then numbers."""
    return (Cell(first), *(figure(text) for text in texts))


def heads(first: str, *texts: str) -> tuple[Cell, ...]:
    """Return a head of which all but the first column hold numbers."""
    return row(first, *texts)


def _cell(value: object, digits: int) -> Cell:
    if isinstance(value, bool) or type(value).__name__ == "bool_":
        return Cell("yes" if value else "no")
    if isinstance(value, int | float) or hasattr(value, "dtype"):
        return figure(number(float(value), None, digits))  # type: ignore[arg-type]
    return Cell("–" if value is None else str(value))


def table(frame: pd.DataFrame, caption: str, file: str, shown: int = SHOWN, thinned: bool = False, folded: bool = True, digits: int = 4) -> Table:
    """Return a frame as a table of at most about `shown` rows: every k-th where `thinned`, else the first; the note says which and names the file."""
    count, step = len(frame), 1
    if thinned and count > shown:
        step = -(-count // (shown - 1))
        part = frame.iloc[sorted({*range(0, count, step), count - 1})]
        note = f"One row in {step} and the last, of {count}; all in {file}."
    elif count > shown:
        part, note = frame.head(shown), f"The first {shown} rows of {count}; all in {file}."
    else:
        part, note = frame, f"Also in {file}."
    numeric = [pd.api.types.is_numeric_dtype(part[name]) and not pd.api.types.is_bool_dtype(part[name]) for name in part.columns]
    head = tuple(figure(str(name)) if is_number else Cell(str(name)) for name, is_number in zip(part.columns, numeric, strict=True))
    columns = [[_cell(None if pd.isna(value) and not numeric[k] else value, digits) for value in part.iloc[:, k]] for k in range(part.shape[1])]
    return Table(caption, head, tuple(zip(*columns, strict=True)), note, folded)
