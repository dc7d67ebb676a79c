"""One table model for every form a report takes: raw value and finished text of each cell."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Literal

from carrylab.findings import DOUBTFUL
from carrylab.report.numbers import count, fixed, in_brackets, in_parentheses, p_value

Kind = Literal["number", "interval", "words"]


@dataclass(frozen=True, slots=True)
class Cell:
    """One cell: the text to print and the raw number where it has one. Numbers stand point over point, words wrap.

    `value` is the number as it stands in the findings; `upper` is the other end of an interval that begins there.
    """

    text: str = ""
    value: float = math.nan
    kind: Kind = "number"
    upper: float = math.nan


@dataclass(frozen=True, slots=True)
class Line:
    """One printed line of a table: its label and cells. A `heading` has no cells."""

    label: str
    cells: tuple[Cell, ...] = ()
    heading: bool = False


@dataclass(frozen=True, slots=True)
class Table:
    """A title, the heads of the columns after the label column, lines, and notes beneath.

    Where columns must be set in blocks, each run of `unit` columns from the left stays in one block.
    """

    title: str
    head: tuple[str, ...]
    lines: tuple[Line, ...]
    notes: tuple[str, ...] = ()
    corner: str = ""
    unit: int = 1

    def filled(self) -> tuple[Line, ...]:
        """The lines that say something: those with more than dashes in them, and headings with such lines below."""
        said = [line for line in self.lines if line.heading or any(cell.text.strip(" -") for cell in line.cells)]
        below = [*said[1:], Line("", heading=True)]
        return tuple(line for line, after in zip(said, below, strict=True) if not (line.heading and after.heading))

    def columns(self, chosen: slice) -> Table:
        """The same table with some of its columns."""
        lines = tuple(Line(line.label, line.cells[chosen], line.heading) for line in self.lines)
        return replace(self, head=self.head[chosen], lines=lines)


def number_cell(value: float, digits: int = 2, *, scale: float = 1) -> Cell:
    """An estimate, printed `scale` times as large: 100 for a decimal in percent."""
    return Cell(fixed(value * scale, digits), value)


def error_cell(value: float, digits: int = 2, *, scale: float = 1) -> Cell:
    """A standard error in parentheses, printed `scale` times as large."""
    return Cell(in_parentheses(value * scale, digits), value)


def interval_cell(lower: float, upper: float, digits: int = 2, *, scale: float = 1) -> Cell:
    """An interval in brackets, printed `scale` times as large."""
    return Cell(in_brackets(lower * scale, upper * scale, digits), lower, "interval", upper)


def p_cell(value: float, note: str = "") -> Cell:
    """A p-value, with a question mark where its note says that it is in doubt."""
    mark = "?" if note.startswith(DOUBTFUL) and not math.isnan(value) else ""
    return Cell(p_value(value) + mark, value)


def doubts(notes: Iterable[str]) -> list[str]:
    """What question marks beside p-values mean, one sentence for each reason among the notes of findings."""
    reasons = (note.removeprefix(DOUBTFUL).partition(";")[0] for note in notes if note.startswith(DOUBTFUL))
    return [f"p with a question mark: {reason}." for reason in dict.fromkeys(reasons)]


def percent_cell(value: float, digits: int = 2) -> Cell:
    """A decimal shown in percent."""
    return number_cell(value, digits, scale=100)


def count_cell(value: float) -> Cell:
    """A whole number."""
    return Cell(count(value), value)


def word_cell(text: str) -> Cell:
    """A text."""
    return Cell(text, kind="words")
