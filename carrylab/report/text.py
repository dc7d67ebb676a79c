"""The report as plain text, in the manner of a journal's tables: rules above, below the head and at the foot."""

from __future__ import annotations

import itertools
import math
import re
import textwrap
from collections.abc import Iterable
from dataclasses import dataclass

import pandas as pd
from tabulate import DataRow, TableFormat, tabulate

from carrylab.report.sections import Part, parts_of
from carrylab.report.table import Cell, Table

BETWEEN = "   "
JOURNAL = TableFormat(None, None, None, None, DataRow("", BETWEEN, ""), DataRow("", BETWEEN, ""), 0, None)
HEAD_WIDTH = 12
# Words wrap at the first of these widths with which a table fits.
WRAPS = (20, 18, 16, 14, 13, 12, 10)


@dataclass(frozen=True, eq=False, slots=True)
class Block:
    """Printed cells: `rows` of equal length, the first `head` of them the head, and the `width` they need."""

    rows: list[list[str]]
    head: int
    width: int


def report_text(findings: pd.DataFrame, *, title: str, width: int = 100, audit: Iterable[str] = ()) -> str:
    """The whole report, at most `width` columns wide where its words allow."""
    return parts_text(parts_of(findings, audit), title, width)


def parts_text(parts: Iterable[Part], title: str, width: int) -> str:
    """A title and the parts below it, at most `width` columns wide where their words allow."""
    said = [title, "=" * min(len(title), width)]
    for part in parts:
        said += _part(part, width)
    return "\n".join(said) + "\n"


def _part(part: Part, width: int) -> list[str]:
    """Tables bring titles of their own; sentences stand under the title of their section."""
    said = ["", part.title] if any(isinstance(piece, str) for piece in part.pieces) else []
    for piece in part.pieces:
        said += [_wrapped(piece, width, "  ")] if isinstance(piece, str) else ["", table_text(piece, width)]
    return said


def _wrapped(text: str, width: int, indent: str) -> str:
    return textwrap.fill(
        text,
        width,
        initial_indent=indent,
        subsequent_indent=indent + "  ",
        break_long_words=False,
        break_on_hyphens=False,
    )


def table_text(table: Table, width: int) -> str:
    """One table with its title and notes; where it is too wide, blocks of its columns stand beneath each other."""
    title = [_wrapped(line, width, "") for line in table.title.splitlines()]
    notes = [_wrapped(note, width, "") for note in table.notes]
    return "\n".join([*title, *map(_printed, _blocks(table, width)), *notes])


def _blocks(table: Table, width: int) -> list[Block]:
    """The fewest blocks that fit, columns shared out evenly, in the widest wrapping of their words that does."""
    units = math.ceil(len(table.head) / table.unit)
    laid: list[Block] = []
    for count in range(1, units + 1):
        cuts = [round(units * at / count) * table.unit for at in range(count + 1)]
        parts = [table.columns(slice(*pair)) for pair in itertools.pairwise(cuts)]
        for limit in WRAPS:
            laid = [_laid(part, limit) for part in parts]
            if max(block.width for block in laid) <= width:
                return laid
    return laid


def _laid(table: Table, limit: int) -> Block:
    """Every cell in lines of at most `limit` characters where its words allow; heads stand on their rule."""
    lines = table.filled()
    labels = [line.label if line.heading else f"  {line.label}" if line.label else "" for line in lines]
    bodies = [
        _body([line.cells[at] if line.cells else Cell() for line in lines], limit) for at in range(len(table.head))
    ]
    heads = [_head(name, body, limit) for name, body in zip(table.head, bodies, strict=True)]
    deep = max(map(len, heads))
    rows = _rows([[""] * (deep - 1) + [table.corner], *([""] * (deep - len(head)) + head for head in heads)])
    for number, label in enumerate(labels):
        rows += _rows([[label], *(body[number] for body in bodies)])
    wide = sum(max(map(len, side)) for side in zip(*rows, strict=True))
    return Block(rows, deep, wide + len(BETWEEN) * len(heads))


def _body(cells: list[Cell], limit: int) -> list[list[str]]:
    """Lines of every cell of a column; numbers are filled up so that their points stand below each other."""
    longest = max((len(_tail(cell)) for cell in cells), default=0)
    return [
        _lines(cell.text, limit)
        if cell.kind == "words"
        else [cell.text + " " * (longest - len(_tail(cell)) if cell.kind == "number" and cell.text else 0)]
        for cell in cells
    ]


def _head(name: str, body: list[list[str]], limit: int) -> list[str]:
    """Lines of a head, no wider than the column needs."""
    return _lines(name, max([min(limit, HEAD_WIDTH), *(len(line) for lines in body for line in lines)]))


def _rows(cells: list[list[str]]) -> list[list[str]]:
    """Cells of several lines as rows of one line each."""
    return [list(row) for row in itertools.zip_longest(*cells, fillvalue="")]


def _tail(cell: Cell) -> str:
    """What stands from the decimal point on."""
    found = re.search(r"(\.\d+)?[)?]?$", cell.text) if cell.kind == "number" else None
    return found[0] if found else ""


def _lines(text: str, limit: int) -> list[str]:
    return textwrap.wrap(text, limit, break_long_words=False) or [""]


def _printed(block: Block) -> str:
    """Head and body between rules."""
    text = tabulate(
        block.rows,
        tablefmt=JOURNAL,
        disable_numparse=True,
        colalign=("left", *("right",) * (len(block.rows[0]) - 1)),
        preserve_whitespace=True,
    )
    lines = [line.rstrip() for line in text.splitlines()]
    rule = "-" * block.width
    return "\n".join([rule, *lines[: block.head], rule, *lines[block.head :], rule])
