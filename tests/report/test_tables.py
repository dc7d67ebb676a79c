"""Tables from findings alone: what stands in which column, what the heads and notes say, and how it is set."""

from __future__ import annotations

import math
import re
from pathlib import Path
from xml.etree import ElementTree

import factory
import pandas as pd
import pytest
from factory import BONDS, CURRENCIES, Place

from carrylab.findings import to_frame
from carrylab.report.detail import check_lines, detail_tables, identity_lines, latest_table, ledger_table
from carrylab.report.html import html_table
from carrylab.report.side_by_side import columns_of, comparison_table, side_by_side
from carrylab.report.table import Cell, Line, Table, interval_cell, number_cell, word_cell
from carrylab.report.text import report_text, table_text

GOLD = Path(__file__).resolve().parent.parent / "gold"
TITLE = "Is the spread paid or passed on?"


@pytest.fixture(scope="module")
def three() -> pd.DataFrame:
    return factory.three_markets()


def line(table: Table | None, label: str, below: int = 0) -> tuple[Cell, ...]:
    """Cells of the line with this label, or of one further below."""
    assert table is not None
    labels = [row.label for row in table.lines]
    return table.lines[labels.index(label) + below].cells


def texts(cells: tuple[Cell, ...]) -> list[str]:
    return [cell.text for cell in cells]


@pytest.mark.parametrize("width", [80, 100])
def test_gold_reports_of_three_markets(three: pd.DataFrame, width: int) -> None:
    """The report made now is left in tests/gold/actual for comparison."""
    name = f"three_markets_{width}.txt"
    actual = GOLD / "actual" / name
    actual.parent.mkdir(exist_ok=True)
    actual.write_text(report_text(three, title=TITLE, width=width), encoding="utf-8", newline="\n")
    assert actual.read_text(encoding="utf-8") == (GOLD / name).read_text(encoding="utf-8")


@pytest.mark.parametrize("width", [60, 80, 100, 140])
def test_every_line_keeps_the_width(three: pd.DataFrame, width: int) -> None:
    assert max(map(len, report_text(three, title=TITLE, width=width).splitlines())) <= width


def test_three_markets_stand_side_by_side_in_eighty_columns(three: pd.DataFrame) -> None:
    first = table_text(side_by_side(three, title="T"), 80).splitlines()  # type: ignore[arg-type]
    assert sum(set(text) == {"-"} for text in first) == 3


def test_no_stars(three: pd.DataFrame) -> None:
    assert "*" not in report_text(three, title=TITLE)


def test_shares_are_those_of_the_findings(three: pd.DataFrame) -> None:
    table = side_by_side(three)
    assert table is not None
    assert table.head == ("Sovereign bonds", "Currencies", "Equity indices")
    assert texts(line(table, "paid as excess return")) == ["0.83", "1.62", "0.29"]
    assert texts(line(table, "paid as excess return", 1)) == ["(0.21)", "(0.45)", "(0.08)"]
    assert texts(line(table, "paid as excess return", 2)) == ["0.135", "0.059", "0.210"]
    assert [cell.value for cell in line(table, "paid as excess return")] == [0.834, 1.62, 0.286]
    # -1 x 0.62 for currencies; -0.033 - 0.031 for the two fundamental legs of equities.
    assert texts(line(table, "comes true in the fundamental")) == ["0.17", "-0.62", "-0.06"]
    assert texts(line(table, "still in the price")) == ["-", "-", "0.80"]
    assert texts(line(table, "sum")) == ["1.000"] * 3
    # 0.286 / (1 - 0.968 x 0.8256)
    assert texts(line(table, "resolved premium share")) == ["0.83", "1.62", "1.42"]
    assert texts(line(table, "resolved premium share", 1)) == ["(0.21)", "(0.45)", "[1.12, 1.93]"]


def test_an_error_that_would_print_as_zero_gets_one_more_decimal(three: pd.DataFrame) -> None:
    table = side_by_side(three)
    assert texts(line(table, "approximation error"))[2] == "-0.009"
    assert texts(line(table, "approximation error", 1))[2] == "(0.002)"


def test_levels_are_in_percent_but_a_log_ratio_is_not(three: pd.DataFrame) -> None:
    table = side_by_side(three)
    assert texts(line(table, "mean signal")) == ["1.21", "0.92", "-3.41"]
    assert texts(line(table, "sd of the signal, effects out")) == ["1.52", "1.52", "0.02"]
    assert texts(line(table, "mean return / mean signal")) == ["1.11", "1.46", "-"]
    newest = latest_table(three, "Equity indices", "dividend-price", "12m")
    assert newest is not None
    assert newest.head == ("at", "signal", "percentile", "premium, %", "interval")
    assert texts(newest.lines[0].cells) == ["2025-12", "-3.41", "37", "-0.12", "[-3.10, 2.86]"]
    bonds = latest_table(three, "Sovereign bonds", "forward-spot", "12m")
    assert bonds is not None
    assert bonds.head[1] == "signal, %"
    assert bonds.lines[0].cells[1].text == "1.21"


def test_the_second_table_is_carry_in_every_market(three: pd.DataFrame) -> None:
    table = side_by_side(three, parity="carry")
    assert texts(line(table, "parity")) == ["carry"] * 3
    assert texts(line(table, "paid as excess return")) == ["0.83", "1.62", "1.38"]
    assert "Carry, the same signal" in report_text(three, title=TITLE)
    without = three[(three["market"] == "Sovereign bonds") | (three["parity"] != "carry")]
    assert "Carry, the same signal" not in report_text(without, title=TITLE)
    assert side_by_side(three, parity="no such parity") is None


def test_notes_say_sample_effects_errors_and_what_a_share_is(three: pd.DataFrame) -> None:
    table = side_by_side(three)
    assert table is not None
    said = " ".join(table.notes)
    for words in (
        "weight times slope",
        "one shared sample",
        "variation in the spread",
        "R2 is within the effects",
        "one-period errors, normal",
        "19 cosines",
        "Second opinion",
    ):
        assert words in said


def test_the_comparison_stands_below_columns_that_are_alike(three: pd.DataFrame) -> None:
    table = comparison_table(three)
    assert table is not None
    assert texts(line(table, "Sovereign bonds less Currencies")) == ["-0.79", "[-1.77, 0.20]", "0.113"]
    assert texts(line(table, "all resolved premium shares equal")) == ["-", "", "0.210"]


def two(first: Place, second: Place) -> pd.DataFrame:
    names = (first.market, second.market)
    joint = factory.joint("each market's own spread", names, first.horizon)
    return to_frame([*factory.column(first, BONDS), *factory.column(second, CURRENCIES), *joint])


@pytest.mark.parametrize(
    ("second", "said", "compared"),
    [
        (Place("FX", "uncovered-interest"), "", True),
        (Place("FX", "uncovered-interest", first="2001-01"), "Samples differ between the columns.", True),
        (
            Place("FX", "uncovered-interest", horizon="3m"),
            "Horizons differ between the columns, so no test across markets is given.",
            False,
        ),
        (
            Place("FX", "uncovered-interest", interval="quarter", last="2024-Q3"),
            "Intervals and samples differ between the columns, so no test across markets is given.",
            False,
        ),
    ],
)
def test_the_head_says_what_differs(second: Place, said: str, compared: bool) -> None:
    findings = two(Place("Bonds", "forward-spot"), second)
    table = side_by_side(findings, title="T")
    assert table is not None
    assert table.title == (f"T\n{said}" if said else "T")
    assert (comparison_table(findings) is not None) is compared


def test_the_horizon_is_the_one_most_markets_share() -> None:
    rows = []
    for market, horizons in {"A": ("1m", "12m"), "B": ("3m", "12m"), "C": ("3m",)}.items():
        for horizon in horizons:
            rows += factory.column(Place(market, "uncovered-interest", horizon=horizon), CURRENCIES)
    assert [column.horizon for column in columns_of(to_frame(rows))] == ["12m", "3m", "3m"]


def test_detail_has_groups_first_and_pooled_last(three: pd.DataFrame) -> None:
    table = next(detail_tables(three))
    assert table.title == "Sovereign bonds: forward-spot, 12m, by month, origins 1996-01 to 2024-12"
    assert table.head == ("excess return", "R2", "rate rise", "R2", "p, nothing paid", "p, all paid", "obs.")
    assert [row.label for row in table.lines] == ["2y", "", "10y", "", "pooled", ""]
    # The factory moves the return slope of the second group by 0.22 and the other one against it.
    assert texts(line(table, "10y"))[:4] == ["1.05", "0.135", "-0.05", "0.009"]
    assert texts(line(table, "10y", 1))[:4] == ["(0.21)", "", "(0.21)", ""]
    said = " ".join(table.notes)
    assert "excess return 0, rate rise 1" in said
    assert "R2 within the effects" in said


def test_detail_gives_dates_by_group_where_they_differ(three: pd.DataFrame) -> None:
    rows = three[(three["market"] == "Sovereign bonds") & (three["parity"] == "forward-spot")].copy()
    rows.loc[rows["group"] == "10y", "first"] = "2004-01"
    (table,) = detail_tables(rows)
    assert table.title == "Sovereign bonds: forward-spot, 12m, by month"
    assert table.head[-2:] == ("from", "to")
    assert texts(line(table, "10y"))[-2:] == ["2004-01", "2024-12"]
    assert texts(line(table, "2y"))[-2:] == ["1996-01", "2024-12"]


def test_legs_without_an_identity_have_a_p_of_their_own(three: pd.DataFrame) -> None:
    keep = (three["market"] == "Currencies") & (three["section"] == "shares") & (three["parity"] != "carry")
    rows = three[keep & three["term"].isin(["signal", "const"]) & (three["rank"] == "headline")].copy()
    rows["weight"] = math.nan
    (table,) = detail_tables(rows)
    assert table.head == ("excess return", "R2", "p", "foreign appreciation", "R2", "p", "obs.")
    assert texts(line(table, "pooled")) == ["1.62", "0.059", "<0.001", "0.62", "0.005", "<0.001", "3,210"]
    assert "Weights" not in " ".join(table.notes)


def test_an_added_predictor_stands_below_the_signal(three: pd.DataFrame) -> None:
    keep = (three["market"] == "Currencies") & (three["section"] == "shares") & (three["parity"] != "carry")
    rows = three[keep & (three["group"] == "pooled")]
    added = rows[(rows["term"] == "const") & (rows["rank"] == "headline")].assign(term="growth gap", estimate=0.5)
    (table,) = detail_tables(pd.concat([rows, added], ignore_index=True))
    assert [row.label for row in table.lines] == ["pooled", "", "  growth gap", ""]
    assert texts(line(table, "  growth gap"))[0] == "0.50"


def test_warnings_and_accounts_travel_into_the_report(three: pd.DataFrame) -> None:
    assert check_lines(three) == [
        "warning D3 fx_spot.csv QNKQMT: unchanged for 3 months",
        "Notes in findings.csv, section check: 1.",
    ]
    first = identity_lines(three)[0]
    assert first.startswith("Sovereign bonds, forward-spot, 12m: largest gap 2.8e-17 over 3,210 rows; largest at QN")
    ledger = ledger_table(three)
    assert ledger is not None
    assert ledger.head == ("series", "read", "missing", "duplicates", "outside", "superseded", "used")
    assert texts(line(ledger, "fx_spot.csv")) == ["1", "3,330", "2", "1", "0", "3", "3,324"]


def test_points_stand_below_each_other() -> None:
    cells = ["1.31", "(0.38)", "0.135", "-104.81", "<0.001", "12,736", "-"]
    table = Table("T", ("a", "b"), tuple(Line("x", (Cell(text), Cell("|", kind="words"))) for text in cells))
    printed = [text for text in table_text(table, 80).splitlines() if text.startswith("  x")]
    assert len({text.index(".") for text in printed if "." in text}) == 1
    point = printed[0].index(".")
    assert printed[5][:point].endswith("12,736")
    assert printed[6][:point].endswith(" -")


def test_words_and_intervals_stand_at_the_right_edge() -> None:
    cells = (number_cell(1.2), interval_cell(-1.0, 2.0), word_cell("in doubt"))
    printed = table_text(Table("T", ("a",), tuple(Line("x", (cell,)) for cell in cells)), 80).splitlines()[4:7]
    assert printed[0].rstrip().endswith("1.20")
    assert printed[1].endswith("[-1.00, 2.00]")
    assert len(printed[1]) == len(printed[2])


def test_columns_too_wide_are_set_in_even_blocks_that_keep_units_together() -> None:
    head = tuple(f"{name} {at}" for at in range(5) for name in ("slope", "R2"))
    cells = tuple(Cell(f"{at}.12345678") for at in range(10))
    text = table_text(Table("T", head, (Line("x", cells),), notes=("n",), corner="c", unit=2), 90)
    heads = [re.findall(r"(?:slope|R2) \d", row) for row in text.splitlines() if row.startswith("c ")]
    assert heads == [list(head[:4]), list(head[4:])]
    assert text.count("\nn") == 1


def test_a_table_of_one_wide_column_is_printed_all_the_same() -> None:
    text = table_text(Table("T", ("a",), (Line("x", (Cell("1" * 70),)),)), 60)
    assert "1" * 70 in text


def test_html_is_well_formed_and_complete(three: pd.DataFrame) -> None:
    table = side_by_side(three, title="<T>")
    assert table is not None
    root = ElementTree.fromstring(f"<div>{html_table(table)}</div>")
    shown = ["".join(row.itertext()) for row in root.iter("tr")]
    assert len(shown) == 1 + len(table.filled())
    assert any("1.20" not in text and "paid as excess return0.831.620.29" in text for text in shown)
    assert root.findtext("table/caption") == "<T>"
