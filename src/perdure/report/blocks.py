"""What sections are made of: paragraphs, notes, lists, tables, panels of figures. The templates give each its looks."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from typing import Literal

from perdure.report.figures.canvas import Picture

Align = Literal["text", "number"]


@dataclass(frozen=True, slots=True)
class Text:
    """A paragraph."""

    text: str
    block: str = "text"


@dataclass(frozen=True, slots=True)
class Subhead:
    """A heading below that of the section."""

    text: str
    block: str = "subhead"


@dataclass(frozen=True, slots=True)
class Note:
    """A remark that must not be overlooked; ``tone`` is a key of :data:`perdure.report.palette.TONES`."""

    tone: str
    text: str
    block: str = "note"


@dataclass(frozen=True, slots=True)
class Bullets:
    """An unordered list."""

    items: tuple[str, ...]
    block: str = "bullets"


@dataclass(frozen=True, slots=True)
class Key:
    """A legend common to the figures that follow: pairs of (swatch class of the style sheet, words)."""

    entries: tuple[tuple[str, str], ...]
    block: str = "key"


@dataclass(frozen=True, slots=True)
class Column:
    """A column of a table.

    Attributes:
        title: heading.
        align: numbers stand right.
        minor: long text that may be small and break anywhere, as a digest.
    """

    title: str
    align: Align = "text"
    minor: bool = False


@dataclass(frozen=True, slots=True)
class Cell:
    """A cell of a table.

    Attributes:
        text: what is shown, escaped by the template.
        tone: key of the tones for a verdict or an outcome, "" for none.
    """

    text: str
    tone: str = ""


@dataclass(frozen=True, slots=True)
class Table:
    """A table.

    Attributes:
        caption: what the table shows; also its label for readers who can't see it.
        columns: headings.
        rows: cells, one a column.
        headers: number of leading cells that head their row.
    """

    caption: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]
    headers: int = 1
    block: str = field(default="table")


@dataclass(frozen=True, slots=True)
class Panels:
    """Figures side by side where the page is wide enough; ``wide`` gives one figure a row of its own."""

    pictures: tuple[Picture, ...]
    wide: bool = False
    block: str = "panels"


Block = Text | Subhead | Note | Bullets | Key | Table | Panels


def cells(*texts: str) -> tuple[Cell, ...]:
    """A row of plain cells."""
    return tuple(Cell(text) for text in texts)


def columns(titles: Iterable[str], numbers: Sequence[str] = (), minor: Sequence[str] = ()) -> tuple[Column, ...]:
    """Columns by title; those named in ``numbers`` stand right, those in ``minor`` are small."""
    return tuple(Column(title, "number" if title in numbers else "text", title in minor) for title in titles)
