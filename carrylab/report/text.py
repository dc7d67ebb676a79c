"""The report as plain text, in the manner of a journal's tables: rules above, below the head and at the foot."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable

import pandas as pd
from tabulate import tabulate

from carrylab.report.detail import check_lines, detail_tables, identity_lines, latest_table, ledger_table
from carrylab.report.side_by_side import columns_of, comparison_table, side_by_side
from carrylab.report.table import Line, Table

HEAD_WIDTH = 12
GAP = 2
CAUTIONS = (
    "Not investment advice. Everything here is in sample, and a premium in sample is no forecast.",
    "Before costs, margin, tax and capital controls. Carry earns little by little and loses in crashes; a peg that "
    "held says nothing about the day it breaks.",
    "Horizons, markets and countries are not independent evidence. Local rules may ask for licensed advice.",
)


def report_text(findings: pd.DataFrame, *, title: str, width: int = 100, audit: Iterable[str] = ()) -> str:
    """The whole report, at most `width` columns wide where its words allow."""
    parts = [title, "=" * min(len(title), width)]
    main = side_by_side(findings, title="Is the spread paid out, or does it come true?")
    parts += _tables([main, comparison_table(findings)], width)
    if len(columns_of(findings, "carry")) > 1 and {column.parity for column in columns_of(findings)} != {"carry"}:
        shared = side_by_side(findings, title="Carry, the same signal in every market", parity="carry")
        parts += _tables([shared, comparison_table(findings, "carry")], width)
    parts += _tables(detail_tables(findings), width)
    parts += _tables((latest_table(findings, c.market, c.parity, c.horizon) for c in columns_of(findings)), width)
    parts += _section("Load checks", check_lines(findings), width)
    parts += _section("Identities", identity_lines(findings), width)
    parts += _tables([ledger_table(findings)], width)
    parts += _section("Audit", audit, width)
    parts += _section("Cautions", CAUTIONS, width)
    return "\n".join(parts) + "\n"


def _tables(tables: Iterable[Table | None], width: int) -> list[str]:
    return [text for table in tables if table is not None for text in ("", table_text(table, width))]


def _section(title: str, lines: Iterable[str], width: int) -> list[str]:
    listed = [_wrapped(line, width, "  ") for line in lines]
    return ["", title, *listed] if listed else []


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
    """One table; where it is too wide its columns are set in blocks beneath each other."""
    notes = [_wrapped(note, max(width, 60), "") for note in table.notes]
    return "\n".join([table.title, *(_block(part) for part in _blocks(table, width)), *notes])


def _blocks(table: Table, width: int) -> list[Table]:
    """As many columns in each block as fit, evenly shared out."""
    label = max(map(len, [table.corner, *(_label(line) for line in table.lines if not line.heading)]))
    sizes = [GAP + max(map(len, [*_head(table, at), *_texts(table, at)])) for at in range(len(table.head))]
    fit = len(sizes)
    while fit > 1 and any(label + sum(sizes[at : at + fit]) > width for at in range(0, len(sizes), fit)):
        fit -= 1
    return [table.columns(slice(at, at + fit)) for at in range(0, len(sizes), fit)]


def _texts(table: Table, at: int) -> list[str]:
    return [line.cells[at].text for line in table.lines if line.cells]


def _head(table: Table, at: int) -> list[str]:
    """The head of a column in lines no wider than its cells need."""
    wide = max([HEAD_WIDTH, *map(len, _texts(table, at))])
    return [f"{part} " for part in textwrap.wrap(table.head[at], wide, break_long_words=False)]


def _block(table: Table) -> str:
    """Head and body between rules, set by tabulate."""
    heads = [_head(table, at) for at in range(len(table.head))]
    deep = max(len(parts) for parts in heads)
    padded = [[""] * (deep - len(parts)) + parts for parts in heads]
    rows = [[table.corner if at == deep - 1 else "", *(parts[at] for parts in padded)] for at in range(deep)]
    rows += [[_label(line), *(cell.text for cell in line.cells)] for line in table.filled()]
    text = tabulate(
        [row + [""] * (1 + len(table.head) - len(row)) for row in rows],
        tablefmt="plain",
        disable_numparse=True,
        colalign=("left", *("right",) * len(table.head)),
        preserve_whitespace=True,
    )
    printed = [line.rstrip() for line in text.splitlines()]
    rule = "-" * max(map(len, printed))
    return "\n".join([rule, *printed[:deep], rule, *printed[deep:], rule])


def _label(line: Line) -> str:
    return line.label if line.heading else f"  {line.label}" if line.label else ""
