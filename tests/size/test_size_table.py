"""The size table: how a rate is judged by its bars, what is kept on record, and that the guide shows the record."""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).resolve().parents[2] / "scripts"))

import size_worlds
from size_bars import BARS, Bar, allowed, bars_of, outside
from size_cells import CELLS, counted
from size_table import Result, complaints, read, tables, write

ROOT = Path(__file__).resolve().parents[2]
RECORD = ROOT / "scripts" / "sizes.csv"


def result(**changes: object) -> Result:
    plain = Result("currencies", "N 10, T 240, h 12", "one-period", 5.0, 2500, 0, 1, "2026-01-01")
    return replace(plain, **changes)


def test_a_bar_is_widened_by_two_monte_carlo_errors() -> None:
    """At 4% and 2,500 samples one error is sqrt(.04 x .96 / 2500) = .392 points."""
    low, high = allowed(Bar("any", "", "any", 4, 20), 2500)
    assert low == pytest.approx(4 - 2 * 0.392, abs=0.001)
    assert high == pytest.approx(20 + 2 * 0.8, abs=0.001)


def test_a_rate_outside_its_bar_is_one_line_and_marked_in_the_table() -> None:
    found = [result(percent=9.0), result(test="bartlett", percent=16.0)]
    lines = [line for line in complaints(found) if "no result" not in line]
    assert lines == [
        "currencies, N 10, T 240, h 12: one-period 9.0% of 2500 samples, bar 3.5 to 7, 2.8 to 8.0 with two Monte Carlo "
        "errors"
    ]
    assert "| 9.0 (outside 3.5 to 7) | 16.0 | 2,500 | 2026-01-01 |" in tables(found)


def test_a_negative_control_that_looks_fine_is_complained_of() -> None:
    lines = complaints([result(test="bartlett", percent=5.0)])
    assert any("bartlett 5.0%" in line and "bar 13 to 20" in line for line in lines)


def test_a_bar_that_nothing_is_held_to_is_complained_of() -> None:
    lines = complaints([result()])
    assert sum("no result" in line for line in lines) == len(BARS) - 1


def test_results_on_record_are_read_back_and_merged_in_the_order_of_the_table(tmp_path: Path) -> None:
    path = tmp_path / "sizes.csv"
    assert read(path) == {}
    write(path, [result(row="N 30, T 240, h 12"), result(row="N 1, T 240, h 12"), result(percent=4.25)])
    back = read(path)
    assert [one.row for one in back.values()] == ["N 1, T 240, h 12", "N 10, T 240, h 12", "N 30, T 240, h 12"]
    assert back[result().key] == result(percent=4.25)


def test_the_guide_shows_the_record() -> None:
    guide = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    inside = guide.partition("<!-- sizes begin -->\n")[2].partition("\n<!-- sizes end -->")[0]
    assert inside == tables(list(read(RECORD).values()))


def test_every_cell_is_on_record_and_every_bar_holds_something() -> None:
    held = {(one.part, bar) for one in read(RECORD).values() for bar in bars_of(*one.key)}
    assert {bar for _, bar in held} == set(BARS)
    rows = {(one.part, one.row, bool(one.draws)) for one in read(RECORD).values()}
    for cell in CELLS.values():
        assert any(
            part == cell.part and row.startswith(cell.world) and drawn == bool(cell.draws) for part, row, drawn in rows
        )


def test_the_same_counts_however_samples_are_split_over_workers() -> None:
    name = "coverage, N 1, T 240, h 1"
    whole, first, rest = (counted(name, *ends, 0)[0] for ends in ((0, 20), (0, 7), (7, 20)))
    assert whole == first + rest


def test_a_rate_far_beyond_is_outside_and_one_within_two_errors_is_not() -> None:
    bar = Bar("any", "", "any", 3.5, 7)
    assert not outside(bar, 7.5, 1000)
    assert outside(bar, 9.0, 1000)
    assert outside(bar, 1.0, 1000)


def test_a_currency_return_lacks_what_its_differential_was_revised_by() -> None:
    """Over two months: y_{t+1} + y_{t+2} - (x_{t+1} - .97 x_t), worked by hand."""
    world = size_worlds.Returns(np.array([[1.0], [2.0], [0.0]]), np.array([[0.0], [5.0], [7.0]]), 0.97, revised=True)
    assert size_worlds.held(world, 2).y[0, 0, 0] == pytest.approx(5 + 7 - (2 - 0.97))


def test_the_slope_over_two_months_by_hand() -> None:
    """A month's slope of 2 carries on with 2 x .97."""
    assert size_worlds.slope_over(2.0, 2) == pytest.approx(3.94)


def test_bond_steps_add_up_to_the_year() -> None:
    drawn = size_worlds.curves(np.random.default_rng(1), (40, 2), ((0.9, 0.003),), 3)
    sample = size_worlds.bonds(drawn, (2, 3)).question.sample
    steps = sample.one_step[0]
    assert steps is not None
    assert np.allclose(steps.outcomes[:28].sum(axis=2), sample.y[:28, :, 0])
