"""What is read from long and wide files, and the account of everything dropped."""

import timeit
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from declared import Put
from hypothesis import given, settings
from hypothesis import strategies as st

from carrylab.data.calendar import Interval, Tenor, label, parse_tenor
from carrylab.data.read import Table, read_market, read_panel, read_source
from carrylab.errors import DataError
from carrylab.options import Inference, LegColumn, Market, PanelColumns, Source

COUNTS = ["read", "missing", "duplicates", "outside", "superseded", "used"]


def read(source: Source, interval: Interval = "month", first: str | None = None, last: str | None = None) -> Table:
    return read_source(source, interval=interval, first=first, last=last)


def cells(table: Table, *columns: str) -> list[tuple[object, ...]]:
    frame = table.frame.astype(dict.fromkeys(table.keys, str))
    frame["date"] = frame["date"].dt.strftime("%Y-%m-%d")
    return list(frame[list(columns)].itertuples(index=False, name=None))


def test_a_long_file(put: Put) -> None:
    table = read(put("date,economy,maturity,value\n2024-02-29,QN,1y,2.5\n2024-01-31,QN,1y,2\n2024-01-31,QM,18m,-0.5\n"))
    assert table.keys == ("economy", "maturity")
    assert list(table.frame.columns) == ["file", "row", "date", "ordinal", "economy", "maturity", "value"]
    assert cells(table, "row", "date", "ordinal", "economy", "maturity", "value") == [
        (4, "2024-01-31", 24288, "QM", "18m", -0.5),
        (3, "2024-01-31", 24288, "QN", "12m", 2.0),
        (2, "2024-02-29", 24289, "QN", "12m", 2.5),
    ]
    assert table.frame["file"].astype(str).unique().tolist() == ["data.csv"]
    assert table.frame["date"].dtype == "datetime64[s]"
    assert table.frame["ordinal"].dtype == np.int64


def test_a_wide_file_with_the_key_as_column_names(put: Put) -> None:
    source = replace(put("date,economy,1m,1y\n2024-01,QM,1,2\n2024-02,QM,,4\n"), spread="maturity")
    table = read(source)
    assert table.keys == ("economy", "maturity")
    assert cells(table, "row", "economy", "maturity", "value") == [
        (2, "QM", "12m", 2.0),
        (3, "QM", "12m", 4.0),
        (2, "QM", "1m", 1.0),
    ]


def test_a_wide_file_with_mapped_names(put: Put) -> None:
    source = replace(
        put("obs_date,r1,r12\n2024-01,1,2\n"),
        spread="maturity",
        columns={"obs_date": "date", "r1": "1m", "r12": "12m"},
        constants={"economy": "QM"},
    )
    assert cells(read(source), "economy", "maturity", "value") == [("QM", "12m", 2.0), ("QM", "1m", 1.0)]


def test_a_wide_file_with_a_pattern_of_several_keys(put: Put) -> None:
    source = replace(put("date,QM_y12m,QN_y5y\n2024-01,1,2\n"), pattern=r"(?P<economy>[A-Z]{2})_y(?P<maturity>\d+[my])")
    assert cells(read(source), "economy", "maturity", "value") == [("QM", "12m", 1.0), ("QN", "60m", 2.0)]


def test_a_two_way_quote_and_the_tenor_of_the_whole_file(put: Put) -> None:
    source = replace(
        put("date,pair,bid,ask\n2024-01,QNKQMT,1.1,1.2\n2024-02,QNKQMT,,1.3\n", role="forwards"),
        quote="pair",
        tenor=parse_tenor("1q"),
    )
    table = read(source)
    assert table.keys == ("pair", "tenor")
    assert cells(table, "pair", "tenor", "bid", "ask")[0] == ("QNKQMT", "3m", 1.1, 1.2)
    # One side alone has no middle, so it is a hole.
    assert table.ledger["missing"].tolist() == [1]
    assert table.ledger["used"].tolist() == [1]


@pytest.mark.parametrize(
    ("text", "changes"),
    [
        ("date;value\n2024-01;1,5\n", {"decimal": ","}),
        ("date\tvalue\n2024-01\t1,5\n", {"decimal": ","}),
        ('date,value\n2024-01,"1,5"\n', {"decimal": ","}),
        ('"a, b",date,value\n2,2024-01,1.5\n', {}),
        ("date|value\n2024-01|1.5\n", {"separator": "|"}),
        ("\ufeffdate,value\n2024-01,1.5\n", {}),
        ("date,value\r\n2024-01,1.5\r\n", {}),
        ("date,value\r2024-01,1.5\r", {}),
        ("date,value\n\n2024-01,1.5\n\n\n", {}),
        ("date,value\n2024-01,1.5\n,\n", {}),
        ("date,value\n2024-01,1.5", {}),
        ("date, value \n 2024-01 , 1.5 \n", {}),
        ('date,value\n"2024-01","1.5"\n', {}),
        ("date,value\n2024-01,+15e-1\n", {}),
        ("date,level\n2024-01,1.5\n", {}),
        ("when,level,note\n2024-01,1.5,9\n", {"columns": {"when": "date", "level": "value"}}),
        ("date,value\n31/01/2024,1.5\n", {"date_order": "dmy"}),
        ("date,value\n2023-12,n/a\n2024-01,1.5\n", {"missing": ("n/a",)}),
        ("date;value\n2023-12;.\n2024-01;1,5\n", {"missing": (".",), "decimal": ","}),
    ],
)
def test_the_same_value_in_many_spellings(put: Put, text: str, changes: dict[str, object]) -> None:
    table = read(replace(put(text), **changes))
    assert cells(table, "date", "value") == [("2024-01-31", 1.5)]
    assert table.keys == ()
    assert table.ledger["series"].tolist() == ["all"]


@pytest.mark.parametrize("encoding", ["latin-1", "utf-16", "cp1252"])
def test_other_encodings_where_declared(put: Put, encoding: str) -> None:
    source = put("date,index,value\n2024-01,Zürich,1.5\n".encode(encoding))
    assert cells(read(replace(source, encoding=encoding)), "index", "value") == [("Zürich", 1.5)]


def test_numbers_written_by_hand_are_read(put: Put) -> None:
    table = read(put("date,value\n2024-01,\N{MINUS SIGN}0.75\n2024-02, -.5 \n2024-03,  \n2024-04,5.\n"))
    assert table.frame["value"].tolist() == [-0.75, -0.5, 5.0]
    assert table.ledger["missing"].tolist() == [1]


def test_numbers_keep_every_digit(put: Put) -> None:
    values = np.random.default_rng(7).normal(size=500) * 10.0 ** np.arange(-250, 250)
    dates = pd.date_range("1950-01-31", periods=500, freq="ME").strftime("%Y-%m")
    table = read(put("date,value\n" + "".join(f"{d},{v!r}\n" for d, v in zip(dates, values.tolist(), strict=True))))
    assert table.frame["value"].tolist() == values.tolist()


def test_the_code_na_is_a_code_and_no_hole(put: Put) -> None:
    long = read(put("date,economy,value\n2024-01,NA,1\n2024-01,nan,2\n2024-01,null,3\n"))
    assert cells(long, "economy", "value") == [("NA", 1.0), ("nan", 2.0), ("null", 3.0)]
    wide = read(replace(put("date,NA,QM\n2024-01,1,2\n"), spread="economy"))
    assert cells(wide, "economy", "value") == [("NA", 1.0), ("QM", 2.0)]
    marked = read(replace(put("date,economy,value\n2024-01,NA,NA\n2024-02,NA,1\n"), missing=("NA",)))
    assert cells(marked, "economy", "value") == [("NA", 1.0)]


def test_codes_are_kept_as_written(put: Put) -> None:
    table = read(put("date,index,value\n2024-01,007,1\n2024-01, Q M ,2\n2024-01,1e3,3\n"))
    assert cells(table, "index") == [("007",), ("1e3",), ("Q M",)]


def test_the_last_observation_of_a_period_counts(put: Put) -> None:
    table = read(put("date,economy,value\n2024-01-05,QM,1\n2024-01-30,QM,2\n2024-01-31,QM,\n2024-02-01,QM,3\n"))
    assert cells(table, "date", "value") == [("2024-01-30", 2.0), ("2024-02-01", 3.0)]
    assert table.ledger.iloc[0].tolist() == ["data.csv", "QM", 4, 1, 0, 0, 1, 2, "2024-01-30", "2024-02-01"]


def test_every_day_counts_on_a_day_calendar(put: Put) -> None:
    table = read(put("date,value\n2024-01-05,1\n2024-01-08,2\n"), "day")
    assert table.frame["ordinal"].diff().tolist()[1] == 3
    assert table.ledger["superseded"].tolist() == [0]


def test_repeated_rows_are_dropped_and_counted(put: Put) -> None:
    table = read(put("date,economy,value\n" + "2024-01,QM,1\n" * 3 + "2024-01,QN,1\n"))
    assert cells(table, "row", "economy") == [(2, "QM"), (5, "QN")]
    assert table.ledger["duplicates"].tolist() == [2, 0]


def test_repeated_two_way_quotes_are_the_same_and_one_side_alone_is_a_hole(put: Put) -> None:
    source = put("date,pair,bid,ask\n2024-01,QNKQMT,1,2\n2024-01,QNKQMT,1,2\n2024-01,QNKQMT,,2\n", role="spot")
    table = read(replace(source, quote="pair"))
    assert table.ledger["duplicates"].tolist() == [1]
    assert table.ledger["missing"].tolist() == [1]


@pytest.mark.parametrize(
    ("first", "last", "kept"),
    [
        (None, None, [1.0, 2.0, 3.0]),
        ("2024-02", None, [2.0, 3.0]),
        ("2024", "2024-02", [1.0, 2.0]),
        ("2024-02-15", None, [2.0, 3.0]),
        (None, "2024-02-15", [1.0]),
        ("2024-Q2", None, []),
    ],
)
def test_from_and_until_bound_everything(put: Put, first: str | None, last: str | None, kept: list[float]) -> None:
    table = read(put("date,value\n2024-01-31,1\n2024-02-29,2\n2024-03-31,3\n"), first=first, last=last)
    assert table.frame["value"].tolist() == kept
    assert table.ledger["outside"].tolist() == [3 - len(kept)]


def test_a_value_before_from_is_not_judged(put: Put) -> None:
    table = read(put("date,value\n2023-12,-1\n2024-01,1\n", role="prices"), first="2024-01")
    assert table.frame["value"].tolist() == [1.0]


def test_a_file_without_any_value_is_an_empty_table(put: Put) -> None:
    table = read(put("date,economy,value\n2024-01,QM,\n2024-02,QM,\n"))
    assert len(table.frame) == 0
    assert table.ledger.iloc[0].tolist() == ["data.csv", "QM", 2, 2, 0, 0, 0, 0, "", ""]


@given(st.data())
@settings(max_examples=60)
def test_every_value_read_is_used_or_dropped_for_one_reason_whatever_the_order_of_rows(
    tmp_path_factory: pytest.TempPathFactory, data: st.DataObject
) -> None:
    days = pd.date_range("2024-01-01", periods=40, freq="3D").strftime("%Y-%m-%d")
    row = st.tuples(st.sampled_from(list(days)), st.sampled_from(["QM", "QN", "NA"]))
    value = {pair: str(number) for number, pair in enumerate((d, e) for d in days for e in ("QM", "QN", "NA"))}
    rows = data.draw(st.lists(row, min_size=1, max_size=60))
    lines = [f"{d},{e},{'' if int(value[d, e]) % 7 == 0 else value[d, e]}" for d, e in rows]
    path = tmp_path_factory.mktemp("rows") / "data.csv"
    tables = []
    for order in (lines, data.draw(st.permutations(lines))):
        path.write_text("\n".join(["date,economy,value", *order]), encoding="utf-8")
        tables.append(read(Source("zero_yields", path, "data.csv"), first="2024-01-15", last="2024-03"))
    ledger = tables[0].ledger
    assert ledger["read"].sum() == len(rows)
    assert (ledger["read"] == ledger[COUNTS[1:]].sum(axis=1)).all()
    pd.testing.assert_frame_equal(ledger, tables[1].ledger)
    columns = ["date", "ordinal", "economy", "value"]
    pd.testing.assert_frame_equal(tables[0].frame[columns], tables[1].frame[columns])
    assert not tables[0].frame.duplicated(["economy", "ordinal"]).any()
    newest = {(e, d[:7]): d for d, e in sorted(rows) if int(value[d, e]) % 7 and "2024-01-15" <= d <= "2024-03-31"}
    assert sorted((e, d) for d, e in cells(tables[0], "date", "economy")) == sorted(
        (e, d) for (e, _), d in newest.items()
    )


def parquet(tmp_path: Path, frame: pd.DataFrame) -> Source:
    frame.to_parquet(tmp_path / "data.parquet")
    return Source("zero_yields", tmp_path / "data.parquet", "data.parquet")


def test_parquet_with_typed_columns_is_read_as_its_text_would_be(tmp_path: Path) -> None:
    values = np.array([0.1, np.nan, -1e-17, 1 / 3])
    frame = pd.DataFrame(
        {
            "date": pd.to_datetime(["2024-01-31", "2024-02-29", "2024-03-31", "2024-04-30"]),
            "economy": pd.Categorical(["NA", "NA", "NA", "NA"]),
            "value": values,
        }
    )
    table = read(parquet(tmp_path, frame))
    assert table.frame["value"].tolist() == [0.1, -1e-17, 1 / 3]
    assert cells(table, "row", "economy", "date")[0] == (2, "NA", "2024-01-31")
    assert table.ledger["missing"].tolist() == [1]


def test_parquet_with_the_dates_as_index_and_texts_as_periods(tmp_path: Path) -> None:
    index = pd.Index(["2024-01", "2024-02"], name="date")
    frame = pd.DataFrame({"1m": pd.array([1, None], dtype="Int64"), "2m": np.float32([0.5, 2])}, index=index)
    table = read(replace(parquet(tmp_path, frame), spread="maturity", constants={"economy": "QM"}))
    assert cells(table, "date", "maturity", "value") == [
        ("2024-01-31", "1m", 1.0),
        ("2024-01-31", "2m", 0.5),
        ("2024-02-29", "2m", 2.0),
    ]


def market(sources: dict[str, tuple[Source, ...]], interval: Interval = "month", **changes: object) -> Market:
    plain = Market("M", "bonds", ("forward-spot",), (parse_tenor("1m"),), interval, None, Inference(), sources)
    return replace(plain, **changes)


def test_a_market_reads_every_file_of_every_role(put: Put) -> None:
    one = put("date,economy,maturity,value\n2024-03,QM,1m,1\n", "one.csv")
    two = put("date,economy,maturity,value\n2024-01,QN,1m,1\n", "two.csv")
    late = put("date,value\n2024-09,1\n", "late.csv", role="growth")
    found = read_market(market({"zero_yields": (one, two)}, controls=(late,)))
    assert [table.source.file for table in found.tables["zero_yields"]] == ["one.csv", "two.csv"]
    assert [found.calendar.label(row) for row in range(len(found.calendar))] == ["2024-01", "2024-02", "2024-03"]
    assert found.controls[0].frame["value"].tolist() == [1.0]


def test_a_day_on_which_all_is_missing_is_no_day_of_the_calendar(put: Put) -> None:
    source = put("date,economy,maturity,value\n2024-01-05,QM,1m,1\n2024-01-06,QM,1m,\n2024-01-08,QM,1m,1\n")
    found = read_market(market({"zero_yields": (source,)}, "day"))
    assert [found.calendar.label(row) for row in range(len(found.calendar))] == ["2024-01-05", "2024-01-08"]


def test_a_market_without_any_observation_is_refused(put: Put) -> None:
    source = put("date,economy,maturity,value\n2024-01,QM,1m,1\n")
    with pytest.raises(DataError, match="market 'M': no observation lies between from and until; widen them"):
        read_market(market({"zero_yields": (source,)}, first="2025-01"))


def test_a_wide_file_of_four_megabytes_costs_no_more_than_a_few_plain_readings(put: Put) -> None:
    rng = np.random.default_rng(7)
    months = pd.date_range("1996-01-31", periods=360, freq="ME").strftime("%Y-%m")
    frame = pd.DataFrame(rng.normal(3, 1, (360 * 11, 120)).round(4), columns=[f"{n}m" for n in range(1, 121)])
    frame.insert(0, "date", np.repeat(months, 11))
    frame.insert(1, "economy", np.tile([f"Q{letter}" for letter in "MNPQRSTVWXY"], 360))
    source = replace(put(frame.to_csv(index=False)), spread="maturity")

    def plain() -> None:
        pd.read_csv(source.path).melt(["date", "economy"]).sort_values(["economy", "variable", "date"])

    assert len(read(source).frame) == 360 * 11 * 120
    assert _seconds(lambda: read(source)) < 6 * _seconds(plain)


def _seconds(work: Callable[[], object]) -> float:
    """The shortest of three."""
    return min(timeit.repeat(work, number=1, repeat=3))


def test_a_series_published_late_stands_in_the_period_in_which_it_was_known(tmp_path: Path) -> None:
    # December's value, out six weeks later on 11 February, is February's; January's (14 March) is March's.
    path = tmp_path / "dividends.csv"
    path.write_text("date,economy,value\n2003-12-31,EA,1\n2004-01-31,EA,2\n", encoding="utf-8")
    source = Source("dividends", path, "dividends.csv", known_after=Tenor(days=42))
    frame = read_source(source, interval="month", first=None, last=None).frame
    assert [label(int(number), "month") for number in frame["ordinal"]] == ["2004-02", "2004-03"]
    assert list(frame["value"]) == [1.0, 2.0]


def test_days_that_become_known_together_are_no_contradiction(put: Put) -> None:
    # 30 and 31 January are both known on 29 February; the later one counts, and the dates stay their own.
    source = replace(put("date,economy,value\n2004-01-30,EA,1\n2004-01-31,EA,2\n"), known_after=Tenor(months=1))
    table = read_source(source, interval="day", first=None, last=None)
    assert table.frame["date"].dt.strftime("%Y-%m-%d").tolist() == ["2004-01-31"]
    assert [label(int(number), "day") for number in table.frame["ordinal"]] == ["2004-02-29"]
    assert table.ledger["superseded"].tolist() == [1]


def test_until_bounds_what_was_known(put: Put) -> None:
    source = replace(put("date,economy,value\n2004-01-31,EA,1\n2004-02-29,EA,2\n"), known_after=Tenor(months=1))
    table = read_source(source, interval="month", first="2004-02", last="2004-02")
    assert table.frame["value"].tolist() == [1.0]
    assert table.ledger["outside"].tolist() == [1]


def test_a_panel_takes_no_publication_lag(tmp_path: Path) -> None:
    path = tmp_path / "panel.csv"
    path.write_text("date,x,y\n2004-01,1,2\n", encoding="utf-8")
    source = Source("panel", path, "panel.csv", known_after=Tenor(months=1))
    panel = PanelColumns(None, "x", (LegColumn("y", "y"),))
    with pytest.raises(DataError, match="known_after is declared for a panel"):
        read_panel(source, panel, interval="month", first=None, last=None)
