"""Tables as the page sets them: points in line, rows that stay together, blocks that fit, numbers in full."""

from __future__ import annotations

import math

import factory

from carrylab.report.page_table import WIDEST, exact, sheet
from carrylab.report.side_by_side import side_by_side
from carrylab.report.table import (
    Cell,
    Line,
    Table,
    error_cell,
    interval_cell,
    number_cell,
    p_cell,
    percent_cell,
    word_cell,
)


def column(*cells: Cell) -> list[tuple[str, str]]:
    """Text and pad of every cell of a one-column table."""
    (block,) = sheet(Table("T", ("a",), tuple(Line("x", (cell,)) for cell in cells))).blocks
    return [(row.cells[0].text, row.cells[0].pad) for group in block.groups for row in group.rows]


def test_pads_bring_the_points_below_each_other() -> None:
    cells = (number_cell(1.31), error_cell(0.38), number_cell(0.135, 3), Cell("12,736", 12736.0), p_cell(0.002))
    assert column(*cells) == [
        ("1.31", "0)"),
        ("(0.38)", "0"),
        ("0.135", ")"),
        ("12,736", ".000)"),
        ("0.002", ")"),
    ]


def test_words_intervals_and_empty_cells_have_no_pad() -> None:
    shown = column(number_cell(1.5), word_cell("in doubt"), interval_cell(1, 2), Cell())
    assert [pad for _, pad in shown[1:]] == ["", ""]
    assert ("", "") not in shown  # a line with nothing in it is left out


def test_the_hover_has_the_number_of_the_findings() -> None:
    """Percent, errors and whole numbers keep the value they were made from; an interval has both ends."""
    assert exact(percent_cell(0.012103456789)) == "0.012103456789"
    assert exact(error_cell(1 / 3, scale=100)) == "0.3333333333333333"
    assert exact(Cell("12,736", 12736.0)) == "12736"
    assert exact(interval_cell(-0.5, 1 / 3)) == "-0.5 to 0.3333333333333333"
    assert exact(interval_cell(-math.inf, 2.0)) == "-inf to 2"
    assert exact(word_cell("firm")) == exact(number_cell(math.nan)) == ""


def test_a_line_stays_with_those_that_continue_it() -> None:
    one = Cell("1", 1.0)
    lines = (Line("2y", (one,)), Line("", (one,)), Line("  growth", (one,)), Line("", (one,)), Line("10y", (one,)))
    (block,) = sheet(Table("T", ("a",), lines)).blocks
    assert [[row.label for row in group.rows] for group in block.groups] == [["2y", "", "growth", ""], ["10y"]]
    assert [row.spoken for row in block.groups[0].rows] == ["", "2y, continued", "", "growth, continued"]
    assert [row.indent for row in block.groups[0].rows] == [0, 0, 2, 0]


def test_headings_gather_what_stands_below_them() -> None:
    found = sheet(side_by_side(factory.three_markets(), title="T\nSamples differ."))  # type: ignore[arg-type]
    (block,) = found.blocks
    assert found.title == "T"
    assert found.remarks == ("Samples differ.",)
    assert found.by == "columns"
    assert [group.heading for group in block.groups][1:] == [
        "Share of the spread",
        "p-value of the hypothesis",
        "Levels over the horizon",
        "Sample",
    ]
    roles = {row.label: row.role for group in block.groups for row in group.rows if row.role}
    assert roles["paid as excess return"] == "return"
    assert roles["still in the price"] == "carried-over"


def test_a_table_too_wide_is_set_in_blocks_of_whole_units() -> None:
    head = tuple(f"{name} {at}" for at in range(12) for name in ("slope", "R2"))
    cells = tuple(Cell("1.12345678", 1.12345678) for _ in head)
    found = sheet(Table("T", head, (Line("x", cells),), unit=2))
    assert len(found.blocks) == 2
    assert all(block.width <= WIDEST and len(block.head) % 2 == 0 for block in found.blocks)
    assert tuple(name for block in found.blocks for name in block.head) == head


def test_a_hash_is_a_code_and_a_date_stays_whole() -> None:
    cells = (word_cell("a" * 64), word_cell("1996-01"), word_cell("log dividend-price ratio"))
    (block,) = sheet(Table("T", ("a", "b", "c"), (Line("x", cells),))).blocks
    assert [cell.kind for cell in block.groups[0].rows[0].cells] == ["code", "", "w"]
