"""What pages are made of: tables, figures, sentences.  Values only, ready to be laid out by a template."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

FIGURE_SPACE = "\N{FIGURE SPACE}"
PUNCTUATION_SPACE = "\N{PUNCTUATION SPACE}"

Kind = Literal["text", "number"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Cell:
    """One cell: its text, where it leads, and what it is.

    ``key`` names what a row with this first cell is about, as marks in figures do ("lot A", "limit N").

    ``mark`` is the name of a small drawn sign that stands before the text (a verdict, a lot's role);
    ``tone`` is ``good``, ``bad`` or ``quiet``; ``detail`` is a second, smaller line.
    """

    text: str
    href: str = ""
    mark: str = ""
    tone: str = ""
    detail: str = ""
    key: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """A column: its header, unit, and whether it holds numbers (right-aligned)."""

    title: str
    unit: str = ""
    kind: Kind = "text"


@dataclass(frozen=True, slots=True, kw_only=True)
class Row:
    """A row; the first cell is its header.  ``is_total`` sets it apart as a sum."""

    cells: tuple[Cell, ...]
    is_total: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table with a caption, an anchor and headers; ``note`` is a sentence below it.

    A table of few numbers and long text ``stacks``: on a narrow screen each row is a card.
    """

    anchor: str
    caption: str
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]
    note: str = ""
    stacks: bool = False

    @property
    def lines(self) -> list[Line]:
        """The rows as a template lays them out: each with its header, and every cell with the classes it wears.

        With a cell stands the column that a card has to name beside it, if any.
        """
        lines: list[Line] = []
        for row in self.rows:
            dressed = [
                (cell, self._dress(cell, column), column if self._names(cell, column) else None)
                for cell, column in zip(row.cells, self.columns, strict=False)
            ]
            lines.append((row, *dressed[0][:2], dressed[1:]))
        return lines

    def _dress(self, cell: Cell, column: Column) -> str:
        # Numbers are never broken anyway, and a page has thousands of them.
        names = "n" if column.kind == "number" else "s" if len(cell.text) < _SHORT else ""
        if cell.tone:
            names += f" {cell.tone}"
        if cell.mark:
            names += f" v-{cell.mark}"
        if self.stacks and cell.text == "–":
            names += " none"
        return names.lstrip()

    def _names(self, cell: Cell, column: Column) -> bool:
        return self.stacks and column.kind == "number" and bool(cell.text)


#: A row, its first cell with its classes, and the other cells with theirs and with the column that is named there.
Line = tuple[Row, Cell, str, list[tuple[Cell, str, Column | None]]]

#: A cell with less text than this is not broken into lines.
_SHORT = 18


@dataclass(frozen=True, slots=True, kw_only=True)
class Legend:
    """One entry of a figure's legend: the name of a drawn sign and what it stands for."""

    mark: str
    text: str


@dataclass(frozen=True, slots=True, kw_only=True)
class FigureView:
    """A figure: SVG markup drawn by the program, its caption, its legend."""

    anchor: str
    title: str
    svg: str
    caption: str
    legend: tuple[Legend, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Fact:
    """A name and a value, as in "Client: …"; ``href`` is where the value leads, ``tone`` as of a cell."""

    name: str
    value: str
    href: str = ""
    tone: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Section:
    """A part of a page: heading, sentences, facts, tables, figures, and folded parts that show their heading only.

    ``points`` are sentences that stand as a list.  ``trial`` is the data of a trial blend as JSON that can
    stand in markup; its section is shown by a script.
    """

    anchor: str
    title: str
    sentences: tuple[str, ...] = ()
    points: tuple[str, ...] = ()
    tables: tuple[Table, ...] = ()
    figures: tuple[FigureView, ...] = ()
    folded: tuple[Section, ...] = ()
    layout: Literal["plain", "beside", "grid"] = "plain"
    facts: tuple[Fact, ...] = ()
    trial: str = ""


def text_cell(text: str, **more: str) -> Cell:
    """A cell of text."""
    return Cell(text=text, **more)


def aligned(texts: Iterable[str]) -> list[str]:
    """Texts of one column padded behind, so that right-aligned their decimal points stand in one line.

    For values shown as typed, whose number of decimals differs; a comma counts as the point.
    """
    column = list(texts)
    behind = [_behind_point(text) for text in column]
    widest = max(behind, default=0)
    return [
        text + (PUNCTUATION_SPACE if widest and not own else "") + FIGURE_SPACE * (widest - own)
        for text, own in zip(column, behind, strict=True)
    ]


def _behind_point(text: str) -> int:
    """How many characters stand behind the last decimal point or comma."""
    place = max(text.rfind("."), text.rfind(","))
    return len(text) - place - 1 if place >= 0 else 0
