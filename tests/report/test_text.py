"""Tables as text: gold reports, widths, blocks, and cells that stay as they were made."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest
import worlds

import carrylab
from carrylab.report.html import html_table
from carrylab.report.table import Cell, Line, Table, error_cell, number_cell
from carrylab.report.text import table_text

GOLD = Path(__file__).resolve().parent.parent / "gold"
WORLDS = {
    "bonds": (worlds.BONDS, worlds.bonds),
    "currencies": (worlds.CURRENCIES, worlds.currencies),
    "columns": (worlds.COLUMNS, worlds.columns),
}


@pytest.mark.parametrize("name", list(WORLDS))
def test_gold_reports(name: str, tmp_path: Path) -> None:
    """The report of a fixed world; the one made now is left in tests/gold/actual for comparison."""
    study, make = WORLDS[name]
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, study, **make())))
    actual = GOLD / "actual" / f"{name}.txt"
    actual.parent.mkdir(exist_ok=True)
    actual.write_text(results.report(100), encoding="utf-8", newline="\n")
    assert actual.read_text(encoding="utf-8") == (GOLD / f"{name}.txt").read_text(encoding="utf-8")


@pytest.mark.parametrize("width", [80, 100, 140])
def test_the_report_keeps_its_width(width: int, tmp_path: Path) -> None:
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, worlds.BONDS, **worlds.bonds())))
    assert max(map(len, results.report(width).splitlines())) <= width


def test_results_show_themselves(tmp_path: Path) -> None:
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, worlds.BONDS, **worlds.bonds())))
    assert repr(results) == results.report()
    page = results._repr_html_()
    assert page.startswith("<table")
    assert "paid as excess return" in page
    assert results.table().loc["sum", "Bonds"] == "1.000"
    assert results.table("carry").loc["parity", "Bonds"] == "carry"


def test_texts_that_look_like_numbers_stay_as_they_are() -> None:
    table = Table("T", ("a", "b"), (Line("x", (number_cell(1.2), Cell("1e3"))), Line("", (error_cell(0.5), Cell()))))
    text = table_text(table, 80)
    assert "1.20" in text
    assert "1e3" in text
    assert "(0.50)" in text


def test_the_digits_stand_above_those_in_parentheses() -> None:
    table = Table("T", ("a",), (Line("x", (number_cell(1.25),)), Line("", (error_cell(0.5),))))
    above, below = [line for line in table_text(table, 80).splitlines() if "1.25" in line or "0.50" in line]
    assert above.index("1.25") == below.index("0.50")


def test_hostile_names_are_escaped_in_html() -> None:
    table = Table("<b>", ("<script>alert(1)</script>",), (Line("a & b", (Cell("<i>"),)),), notes=("<u>",))
    page = html_table(table)
    for raw in ("<script>", "<b>", "<i>", "<u>", "a & b"):
        assert raw not in page


def test_the_report_does_not_import_plotting() -> None:
    script = "import carrylab.results, sys; print('matplotlib' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False"


def test_a_heading_with_nothing_below_is_left_out() -> None:
    empty = Line("x", (Cell("-"),))
    table = Table(
        "T", ("a",), (Line("Empty", heading=True), empty, Line("Full", heading=True), Line("y", (Cell("1"),)))
    )
    assert [line.label for line in table.filled()] == ["Full", "y"]
