"""A table as the page sets it: groups of rows that stay together, blocks that fit, pads that keep points in line."""

from __future__ import annotations

import itertools
import math
import re
from collections.abc import Iterator
from dataclasses import dataclass

from carrylab.report.side_by_side import ROLE_WORDS
from carrylab.report.table import Cell, Line, Table

# Characters across a table beyond which its columns are set in blocks.
WIDEST = 160
BETWEEN = 2
SHORT, LONG = 18, 40  # a word without blanks: below, it stays on one line; from there, it is a code
_TAIL = re.compile(r"(\.\d+)?([)?]?)$")
_ROLES = {words: role.replace(" ", "-") for role, words in ROLE_WORDS.items()}


@dataclass(frozen=True, slots=True)
class Shown:
    """One cell: its text, the full number for the hover, its class, and a pad that is set but not seen."""

    text: str
    exact: str
    kind: str
    pad: str


@dataclass(frozen=True, slots=True)
class Row:
    """One row; `spoken` is the label that only a screen reader gets where the row continues the one above."""

    label: str
    spoken: str
    indent: int
    role: str
    cells: tuple[Shown, ...]


@dataclass(frozen=True, slots=True)
class Group:
    """Rows that stay together, under a heading or none."""

    heading: str
    rows: tuple[Row, ...]


@dataclass(frozen=True, slots=True)
class Block:
    """Some columns of a table, `width` characters wide."""

    head: tuple[str, ...]
    groups: tuple[Group, ...]
    width: int


@dataclass(frozen=True, slots=True)
class Sheet:
    """A whole table: its title, remarks below the title, blocks and notes. `by` is what a click sorts."""

    title: str
    remarks: tuple[str, ...]
    corner: str
    blocks: tuple[Block, ...]
    notes: tuple[str, ...]
    by: str


def sheet(table: Table) -> Sheet:
    """The table in as few blocks of columns as are at most `WIDEST` characters wide."""
    title, *remarks = table.title.splitlines() or [""]
    by = "columns" if any(line.heading for line in table.lines) else "rows"
    return Sheet(title, tuple(remarks), table.corner, tuple(_blocks(table)), table.notes, by)


def exact(cell: Cell) -> str:
    """The raw number in full, as it stands in findings.csv; nothing for words.

    >>> exact(Cell("0.33", 1 / 3)), exact(Cell("12", 12.0))
    ('0.3333333333333333', '12')
    """
    if math.isnan(cell.value):
        return ""
    lower = _full(cell.value)
    return lower if math.isnan(cell.upper) else f"{lower} to {_full(cell.upper)}"


def _full(value: float) -> str:
    return repr(value).removesuffix(".0")


def _blocks(table: Table) -> list[Block]:
    units = max(1, math.ceil(len(table.head) / table.unit))
    found: list[Block] = []
    for count in range(1, units + 1):
        cuts = [round(units * at / count) * table.unit for at in range(count + 1)]
        found = [_block(table.columns(slice(*pair))) for pair in itertools.pairwise(cuts)]
        if max(block.width for block in found) <= WIDEST:
            break
    return found


def _block(table: Table) -> Block:
    lines = table.filled()
    columns = [[line.cells[at] if line.cells else Cell() for line in lines] for at in range(len(table.head))]
    shown = [_column(cells) for cells in columns]
    widths = [_width(name, cells) for name, cells in zip(table.head, columns, strict=True)]
    labels = max((len(line.label) for line in lines), default=0)
    rows = [tuple(cells[at] for cells in shown) for at in range(len(lines))]
    return Block(table.head, tuple(_groups(lines, rows)), labels + sum(widths) + BETWEEN * len(widths))


def _width(name: str, cells: list[Cell]) -> int:
    """Characters a column needs: a head wraps at its blanks, words wrap too."""
    head = max(map(len, name.split()), default=0)
    body = [max(map(len, cell.text.split()), default=0) if cell.kind == "words" else len(cell.text) for cell in cells]
    return max([head, *body])


def _column(cells: list[Cell]) -> list[Shown]:
    """The cells of one column, numbers padded to the longest tail from the decimal point on."""
    tails = [_tail(cell) for cell in cells]
    decimals = max((len(point) for point, _ in tails), default=0)
    mark = max((len(after) for _, after in tails), default=0)
    return [
        Shown(cell.text, exact(cell), _kind(cell), _pad(cell, tail, decimals, mark))
        for cell, tail in zip(cells, tails, strict=True)
    ]


def _tail(cell: Cell) -> tuple[str, str]:
    """Decimals with their point, and the mark after them."""
    found = _TAIL.search(cell.text) if cell.kind == "number" and cell.text else None
    return (found[1] or "", found[2]) if found else ("", "")


def _pad(cell: Cell, tail: tuple[str, str], decimals: int, mark: int) -> str:
    if cell.kind != "number" or not cell.text:
        return ""
    point, after = tail
    missing = decimals - len(point)
    digits = ("." + "0" * (missing - 1) if not point else "0" * missing) if missing else ""
    return digits + ")" * (mark - len(after))


def _kind(cell: Cell) -> str:
    """Words wrap at their blanks, codes stand on one line."""
    if cell.kind != "words" or (" " not in cell.text and len(cell.text) < SHORT):
        return ""
    return "code" if len(cell.text) >= LONG and " " not in cell.text else "w"


def _groups(lines: tuple[Line, ...], rows: list[tuple[Shown, ...]]) -> Iterator[Group]:
    """A heading with what is below it, or a line with those that continue it: unlabelled or further in."""
    heading, kept = "", list[Row]()
    headed = any(line.heading for line in lines)
    spoken = ""
    for line, cells in zip(lines, rows, strict=True):
        starts = line.heading or (not headed and line.label.strip() and not line.label.startswith(" "))
        if starts and (kept or heading):
            yield Group(heading, tuple(kept))
            heading, kept = "", []
        if line.heading:
            heading = line.label
            continue
        spoken = line.label.strip() or spoken
        kept.append(_row(line, spoken, cells))
    if kept or heading:
        yield Group(heading, tuple(kept))


def _row(line: Line, spoken: str, cells: tuple[Shown, ...]) -> Row:
    label = line.label.strip()
    indent = len(line.label) - len(line.label.lstrip())
    return Row(label, "" if label else f"{spoken}, continued", indent, _ROLES.get(label, ""), cells)
