"""Added predictors as known at t, and panels of signals and legs already built."""

from dataclasses import replace

import numpy as np
import pytest
from declared import Put
from hypothesis import given
from hypothesis import strategies as st

from carrylab.data.asof import as_of
from carrylab.data.calendar import Calendar, Tenor, add, last_day, make_calendar, parse_tenor
from carrylab.data.read import Table, read_control, read_market, read_panel
from carrylab.errors import DataError
from carrylab.options import Inference, LegColumn, Market, PanelColumns, Source

JANUARY = 2024 * 12


def months(count: int) -> Calendar:
    return make_calendar("month", np.arange(count) + JANUARY)


def control(source: Source, known_after: str | None = None, first: str | None = None) -> Table:
    delay = None if known_after is None else parse_tenor(known_after)
    return read_control(replace(source, known_after=delay), interval="month", first=first, last=None)


def same(found: np.ndarray, *expected: float) -> bool:
    return np.array_equal(found, np.array(expected), equal_nan=True)


def test_without_a_delay_only_the_value_of_that_very_period_counts(put: Put) -> None:
    table = control(put("date,growth\n2024-01,1\n2024-03,3\n", role="growth"))
    found = as_of(months(4), table, ["a", "b"])
    assert found.shape == (4, 2)
    assert same(found[:, 0], 1, np.nan, 3, np.nan)
    assert same(found[:, 1], 1, np.nan, 3, np.nan)


def test_with_a_delay_the_newest_value_known_by_the_end_of_the_period_counts(put: Put) -> None:
    table = control(put("date,growth\n2023-12,0\n2024-01,1\n2024-02,\n2024-03,3\n", role="growth"), "2m")
    # Known on: 29 February (December's), 31 March (January's), never (a hole), 31 May (March's).
    assert same(as_of(months(6), table, ["a"])[:, 0], np.nan, 0, 1, 1, 3, 3)


def test_a_delay_of_no_days_carries_the_newest_value_on(put: Put) -> None:
    table = control(put("date,growth\n2024-01-15,1\n2024-03-01,3\n", role="growth"), "0d")
    assert same(as_of(months(4), table, ["a"])[:, 0], 1, 1, 3, 3)


def test_every_date_of_a_period_may_be_the_newest_one_known(put: Put) -> None:
    weeks = "".join(f"2024-01-{day:02d},{day}\n" for day in (3, 10, 17, 24, 31))
    table = control(put("date,value\n" + weeks, role="growth"), "2w")
    assert table.ledger["superseded"].tolist() == [0]
    assert same(as_of(months(2), table, ["a"])[:, 0], 17, 31)  # 17 January + 14 days = 31 January


def test_coarse_dates_stand_at_the_end_of_their_period_where_a_delay_is_declared(put: Put) -> None:
    source = put("date,value\n2023-Q4,4\n2024-Q1,1\n", role="growth")
    assert same(as_of(months(6), control(source, "1m"), ["a"])[:, 0], 4, 4, 4, 1, 1, 1)
    with pytest.raises(DataError, match="date '2023-Q4' names a quarter, too coarse"):
        control(source)


def test_values_before_the_first_period_may_be_the_newest_known_in_it(put: Put) -> None:
    source = put("date,value\n2023-10,1\n2024-01,2\n", role="growth")
    assert same(as_of(months(2), control(source, "1m", first="2024-01"), ["a"])[:, 0], 1, 2)
    assert same(as_of(months(2), control(source, None, first="2024-01"), ["a"])[:, 0], 2, np.nan)


def test_values_by_entity_and_date(put: Put) -> None:
    table = control(put("date,economy,value\n2024-01,NA,1\n2024-02,NA,2\n2024-01,QM,5\n", role="growth"))
    found = as_of(months(2), table, ["QM", "NA", "QX", "QM"])
    assert same(found[0], 5, 1, np.nan, 5)
    assert same(found[1], np.nan, 2, np.nan, np.nan)


def test_values_by_several_keys(put: Put) -> None:
    source = put("date,economy,maturity,value\n2024-01,QM,2y,1\n2024-01,QM,5y,2\n", role="slope")
    assert same(as_of(months(1), control(source), ["QM 60m", "QM 24m"])[0], 2, 1)


def test_a_predictor_that_serves_no_entity_is_refused(put: Put) -> None:
    table = control(put("date,economy,value\n2024-01,QM,1\n", role="growth"))
    with pytest.raises(DataError) as refused:
        as_of(months(1), table, ["QNK", "QPD", "QNK"])
    assert str(refused.value) == (
        "data.csv: 'growth' has no series for QNK, QPD; it has QM by economy; give it the study's codes, or by date "
        "alone"
    )


def test_what_a_predictor_may_be_given_by(put: Put) -> None:
    with pytest.raises(DataError) as refused:
        control(put("date,pair,value\n2024-01,QNKQMT,1\n", role="growth"))
    assert str(refused.value) == (
        "data.csv: 'growth' is given by pair; allowed for an added predictor is by date alone, or also by economy, "
        "currency, index, entity, maturity"
    )


def test_a_predictor_called_like_a_price_may_be_negative(put: Put) -> None:
    assert same(as_of(months(1), control(put("date,value\n2024-01,-1\n", role="spot")), ["a"])[0], -1)


@given(
    st.lists(st.integers(0, 23), min_size=1, max_size=12, unique=True),
    st.integers(0, 3),
    st.integers(0, 20),
    st.integers(0, 23),
)
def test_nothing_dated_after_t_is_known_at_t(
    tmp_path_factory: pytest.TempPathFactory, dated: list[int], delay: int, extra: int, t: int
) -> None:
    calendar = months(24)
    days = last_day(np.array(sorted(dated)) + JANUARY, "month")
    known = add(days, Tenor(delay, extra)) <= calendar.days[t]
    path = tmp_path_factory.mktemp("known") / "data.csv"
    path.write_text("date,value\n" + "".join(f"{d},{n}\n" for n, d in enumerate(days)), encoding="utf-8")
    source = Source("growth", path, "data.csv", known_after=Tenor(delay, extra))
    table = read_control(source, interval="month", first=None, last=None)
    assert same(as_of(calendar, table, ["a"])[t], float(known.sum() - 1) if known.any() else np.nan)


LEGS = (LegColumn("excess return", "rx", 1.0, 0.0, "return", one_step="rx1"), LegColumn("rise", "dy", 1.0, 1.0))
PANEL = PanelColumns("country", "spread", LEGS, ("growth",))


def test_a_panel_keeps_its_columns_and_the_rows_stand_at_their_origin(put: Put) -> None:
    source = put(
        "country,date,dy,rx,spread,growth,rx1,note\nNA,2024-01,1,2,3,4,5,x\nQM,2024-01,,2,3,,,y\n", role="panel"
    )
    table = read_panel(source, PANEL, interval="month", first=None, last=None)
    assert table.keys == ("entity",)
    assert table.frame.columns[4:].tolist() == ["entity", "spread", "growth", "rx", "dy", "rx1"]
    assert table.frame["entity"].astype(str).tolist() == ["NA", "QM"]
    assert same(table.frame.iloc[0, 5:].to_numpy(dtype=float), 3, 4, 2, 1, 5)
    assert same(table.frame.iloc[1, 5:].to_numpy(dtype=float), 3, np.nan, 2, np.nan, np.nan)
    assert table.ledger["used"].tolist() == [1, 1]


def test_rows_of_a_panel_with_the_same_holes_are_the_same(put: Put) -> None:
    source = put("date,country,spread,rx,rx1,dy,growth\n" + "2024-01,QM,1,,,,5\n" * 2, role="panel")
    table = read_panel(source, PANEL, interval="month", first=None, last=None)
    assert table.ledger["duplicates"].tolist() == [1]


def test_a_panel_without_entities_and_with_mapped_names(put: Put) -> None:
    panel = PanelColumns(None, "x", (LegColumn("rise", "dy"),))
    source = replace(put("t,x_t,dy\n2024-01,1,2\n", role="panel"), columns={"t": "date", "x_t": "x"})
    table = read_panel(source, panel, interval="month", first=None, last=None)
    assert table.keys == ()
    assert table.frame[["x", "dy"]].to_numpy().tolist() == [[1, 2]]


def test_a_column_of_a_panel_that_looks_like_a_key_is_only_what_the_study_says(put: Put) -> None:
    panel = PanelColumns("country", "maturity", (LegColumn("rise", "index"),))
    source = put("date,country,maturity,index,economy\n2024-01,QM,1.5,2,x\n", role="panel")
    table = read_panel(source, panel, interval="month", first=None, last=None)
    assert table.keys == ("entity",)
    assert table.frame[["maturity", "index"]].to_numpy().tolist() == [[1.5, 2]]


def test_a_column_of_a_panel_may_not_be_called_as_the_tables_own(put: Put) -> None:
    panel = PanelColumns(None, "series", (LegColumn("rise", "dy"),))
    source = put("date,series,dy\n2024-01,1,2\n", role="panel")
    with pytest.raises(DataError) as refused:
        read_panel(source, panel, interval="month", first=None, last=None)
    assert str(refused.value) == (
        "data.csv: a signal, control or leg may not be called 'series'; give it another name with columns = "
        '{ series = "my series" } and use that in the study'
    )
    renamed = PanelColumns(None, "my series", panel.legs)
    mapped = replace(source, columns={"series": "my series"})
    assert read_panel(mapped, renamed, interval="month", first=None, last=None).frame["my series"].tolist() == [1.0]


@pytest.mark.parametrize(
    ("text", "line"),
    [
        (
            "date,country,spred,rx,rx1,dy,growth\n2024-01,QM,1,2,3,4,5\n",
            "data.csv: no column 'spread'; did you mean 'spred'? found: date, country, spred, rx, rx1, dy, growth; map "
            'another name with columns = { spred = "spread" }',
        ),
        (
            "date,spread,rx,rx1,dy,growth\n2024-01,1,2,3,4,5\n",
            "data.csv: no column 'country'; found: date, spread, rx, rx1, dy, growth; map another name with columns = "
            '{ name_in_file = "country" }',
        ),
        (
            "date,country,spread,rx,rx1,dy,growth\n2024-01,QM,1,2,3,4,5\n2024-01,QM,1,2,3,4,6\n",
            "data.csv: rows 2 and 3 give QM on 2024-01-31 two values, growth 5 and 6; allowed is one; keep one of the "
            "rows",
        ),
        (
            "date,country,spread,rx,rx1,dy,growth\n2024-01,QM,1,2,3,four,5\n",
            "data.csv: row 2, column 'dy': 'four' is no number; allowed are numbers such as -1.25 without thousands "
            'marks, and empty cells; a mark for a missing value must be listed: missing = ["four"]',
        ),
    ],
)
def test_a_panel_that_cannot_be_read(put: Put, text: str, line: str) -> None:
    with pytest.raises(DataError) as refused:
        read_panel(put(text, role="panel"), PANEL, interval="month", first=None, last=None)
    assert str(refused.value) == line


def test_a_columns_market_reads_its_panel(put: Put) -> None:
    source = put("date,country,spread,rx,rx1,dy,growth\n2024-01,QM,1,2,3,4,5\n", role="panel")
    sources = {"panel": (source,)}
    horizons = (parse_tenor("1m"),)
    market = Market("M", "columns", ("columns",), horizons, "month", None, Inference(), sources, panel=PANEL)
    (table,) = read_market(market).tables["panel"]
    assert table.frame["spread"].tolist() == [1.0]
