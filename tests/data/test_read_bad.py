"""What cannot be read as declared is refused in one line: the file, the place, the value seen, what is allowed."""

import io
import sys
import zipfile
from dataclasses import replace
from pathlib import Path

import pandas as pd
import pytest
from declared import Put

from carrylab.data.calendar import parse_tenor
from carrylab.data.read import read_source
from carrylab.errors import DataError, ExtraError
from carrylab.options import Source


def refusal(source: Source, error: type[Exception] = DataError) -> str:
    with pytest.raises(error) as refused:
        read_source(source, interval="month", first=None, last=None)
    line = str(refused.value)
    assert "\n" not in line
    return line


LONG = "date,economy,maturity,value\n"

# Content, changes of the declaration, and the line after the file's name.
CELLS: dict[str, tuple[str, dict[str, object], str]] = {
    "a month that does not exist": (
        LONG + "2024-01,QM,1m,1\n2024-13,QM,1m,2\n",
        {},
        "row 3: date '2024-13' does not exist (month must be in 1..12); allowed are 2024-01-31, 2024-01, "
        "2024-Q1, 2024-W05 and 2024",
    ),
    "an order of day and month not declared": (
        LONG + "03/04/2024,QM,1m,1\n",
        {},
        'row 2: date \'03/04/2024\' may have day or month first; declare date_order = "dmy", "mdy" or '
        '"ymd", or allowed are 2024-01-31, 2024-01, 2024-Q1, 2024-W05 and 2024',
    ),
    "an empty date": (
        LONG + "2024-01,QM,1m,1\n,QM,1m,1\n",
        {},
        "row 3: date '' is no date; allowed are 2024-01-31, 2024-01, 2024-Q1, 2024-W05 and 2024",
    ),
    "a quarter in a study of months": (
        LONG + "2024-Q1,QM,1m,1\n",
        {},
        "row 2: date '2024-Q1' names a quarter, too coarse for the study's interval 'month'; give finer dates "
        "or a coarser interval",
    ),
    "a decimal comma among points": (
        'date,value\n2024-01,1.5\n2024-02,"2,5"\n',
        {},
        "row 3, column 'value': '2,5' has the decimal sign ',', but '.' holds in this file; allowed is one sign, "
        'declared with decimal = "," or ".", and no thousands marks',
    ),
    "a decimal point among commas": (
        "date;value\n2024-01;1,5\n2024-02;2.5\n",
        {"decimal": ","},
        "row 3, column 'value': '2.5' has the decimal sign '.', but ',' holds in this file; allowed is one sign, "
        'declared with decimal = "." or ",", and no thousands marks',
    ),
    "thousands marks": (
        'date,value\n2024-01,"1,234.5"\n',
        {},
        "row 2, column 'value': '1,234.5' is no number; allowed are numbers such as -1.25 without thousands "
        'marks, and empty cells; a mark for a missing value must be listed: missing = ["1,234.5"]',
    ),
    "a word among numbers": (
        "date,economy,rate\n2024-01,QM,1\n2024-02,QM,n/a\n",
        {"columns": {"rate": "value"}},
        "row 3, column 'rate': 'n/a' is no number; allowed are numbers such as -1.25 without thousands marks, "
        'and empty cells; a mark for a missing value must be listed: missing = ["n/a"]',
    ),
    "two values on one date": (
        LONG + "2024-01,QM,1m,1\n2024-01,QN,1m,1\n2024-01,QM,1m,1.25\n",
        {},
        "rows 2 and 4 give QM 1m on 2024-01-31 two values, value 1 and 1.25; allowed is one; keep one of the rows",
    ),
    "two asks on one date": (
        "date,pair,bid,ask\n2024-01,QNKQMT,1,2\n2024-01,QNKQMT,1,3\n",
        {"role": "spot", "quote": "pair"},
        "rows 2 and 3 give QNKQMT on 2024-01-31 two values, ask 2 and 3; allowed is one; keep one of the rows",
    ),
    "two averages in one month": (
        "date,value\n2024-01-10,1\n2024-01-20,2\n",
        {"timing": "average"},
        'row 3: all has a second date, 2024-01-20, in one month, but timing = "average" allows one average a '
        'month; average them first, or declare timing = "end"',
    ),
    "a negative price": (
        "date,QM,QN\n2024-01,1,2\n2024-02,3,-4\n",
        {"role": "prices", "spread": "economy"},
        "row 3, QN: value -4 is no price; allowed is above zero, and an empty cell where there is none",
    ),
    "a spot rate of zero": (
        "date,pair,bid,ask\n2024-01,QNKQMT,0,2\n",
        {"role": "spot", "quote": "pair"},
        "row 2, QNKQMT: bid 0 is no price; allowed is above zero, and an empty cell where there is none",
    ),
    "an empty key": (
        LONG + "2024-01,QM,1m,1\n2024-02, ,1m,1\n",
        {},
        "row 3, column 'economy' is empty; every value needs its economy",
    ),
    "a maturity without unit": (
        LONG + "2024-01,QM,1m,1\n2024-02,QM,12,1\n",
        {},
        "row 3, column 'maturity': maturity '12' is no length of time; write a number and d, w, m, q or y, such as 12m",
    ),
    "a maturity of zero": (
        LONG + "2024-01,QM,0m,1\n",
        {},
        "row 2, column 'maturity': maturity '0m' is no length of time above zero; write such as 12m",
    ),
    "a tenor as column name": (
        "date,currency,1m,spot\n2024-01,QNK,1,2\n",
        {"spread": "tenor"},
        "row 1, column 'spot': tenor 'spot' is no length of time; write a number and d, w, m, q or y, such as 12m",
    ),
    "a ragged row": (
        "date,economy,value\n2024-01,QM,1\n2024-02,QM\n2024-03,QM,1,9\n",
        {},
        "row 3 has 2 cells and the header 3; allowed is the same number",
    ),
    "a ragged row among quoted ones": (
        'date,economy,value\n2024-01,"Q,M",1\n2024-02,QM,1,9\n',
        {},
        "row 3 has 4 cells and the header 3; allowed is the same number",
    ),
    "a quotation mark not closed": (
        'date,economy,value\n2024-01,"QM,1\n2024-02,QM,1\n',
        {},
        "row 2: a quotation mark is not closed, or more follows it (unexpected end of data); allowed are "
        "quotation marks around a whole cell, doubled inside it",
    ),
    "a blank first row": (
        "\ndate,value\n2024-01,1\n",
        {},
        "row 1 is blank; the first row must name the columns",
    ),
    "two columns of one name": (
        "date,value,value\n2024-01,1,2\n",
        {},
        "row 1: two columns are named 'value'; each needs its own name",
    ),
    "no date column": (
        "day,dates,value\n2024-01,2,1\n",
        {},
        "no column 'date'; did you mean 'dates'? found: day, dates, value; map another name with columns = "
        '{ dates = "date" }',
    ),
    "nothing like a date column": (
        "x,value\n2024-01,1\n",
        {},
        "no column 'date'; found: x, value; map another name with columns = { name_in_file = \"date\" }",
    ),
    "a mapped column that is not there": (
        "date,rates\n2024-01,1\n",
        {"columns": {"rate": "value"}},
        "columns maps 'rate', which is no column; found: date, rates",
    ),
    "two columns for one word": (
        "date,day,value\n2024-01,2024-01,1\n",
        {"columns": {"day": "date"}},
        "row 1: columns 'date' and 'day' both stand for 'date'; keep one",
    ),
    "several columns that may be the value": (
        "date,economy,one,two\n2024-01,QM,1,2\n",
        {},
        "no column 'value'; found beside date and keys: one, two; map it with columns = "
        '{ name_in_file = "value" }, or name the key that runs along the columns with spread',
    ),
    "a two-way rate": (
        "date,currency,tenor,bid,ask\n2024-01,QNK,1m,1,2\n",
        {"role": "deposits"},
        "no column 'value'; found beside date and keys: bid, ask; map it with columns = { name_in_file = \"value\" }, "
        "or name the key that runs along the columns with spread",
    ),
    "a spot rate with one side": (
        "date,pair,bid,volume\n2024-01,QNKQMT,1,2\n",
        {"role": "spot", "quote": "pair"},
        "no column 'value', nor 'bid' and 'ask'; found beside date and keys: bid, volume; map it with columns = "
        '{ name_in_file = "value" }, or name the key that runs along the columns with spread',
    ),
    "no value at all": (
        "date,economy\n2024-01,QM\n",
        {},
        "no column 'value'; found beside date and keys: none; map it with columns = "
        '{ name_in_file = "value" }, or name the key that runs along the columns with spread',
    ),
    "a wide file without series": (
        "date,economy\n2024-01,QM\n",
        {"spread": "maturity"},
        "has no column of values beside the date and the keys; expected one a series",
    ),
    "a wide file with one series twice": (
        "date,economy,12m,1y\n2024-01,QM,1,1\n",
        {"spread": "maturity"},
        "row 1, column '1y' stands for the same series as column '12m'; keep one",
    ),
    "a column that does not fit the pattern": (
        "date,y12m,note\n2024-01,1,2\n",
        {"pattern": r"y(?P<maturity>\d+m)"},
        r"row 1, column 'note' does not fit the pattern 'y(?P<maturity>\\d+m)'; allowed are date, keys and "
        "series",
    ),
    "a pattern with a group that is no key": (
        "date,QNK\n2024-01,1\n",
        {"pattern": r"(?P<ccy>[A-Z]{3})"},
        "the pattern's group 'ccy' is no key; allowed: economy, currency, pair, index, entity, maturity, tenor",
    ),
    "a key that is a column and a constant": (
        "date,economy,value\n2024-01,QM,1\n",
        {"constants": {"economy": "QN"}},
        "the key 'economy' is given twice; allowed is one of a column, spread or pattern, and economy = \"...\" "
        "for the whole file",
    ),
    "a tenor that is a column and a constant": (
        "date,currency,tenor,value\n2024-01,QNK,1m,1\n",
        {"tenor": parse_tenor("3m")},
        "the key 'tenor' is given twice; allowed is one of a column, spread or pattern, and tenor = \"...\" for "
        "the whole file",
    ),
    "a constant that is no length of time": (
        "date,economy,value\n2024-01,QM,1\n",
        {"constants": {"maturity": "long"}},
        "the study's maturity: maturity 'long' is no length of time; write a number and d, w, m, q or y, such as 12m",
    ),
}


@pytest.mark.parametrize("case", CELLS)
def test_cells_that_cannot_be_read(put: Put, case: str) -> None:
    content, changes, line = CELLS[case]
    assert refusal(replace(put(content), **changes)) == f"data.csv: {line}"


@pytest.mark.parametrize("cell", ["nan", "NaN", "inf", "-Infinity", "1e999", "1_000", "0x10", "1 000", "1.2.3", "--1"])
def test_what_only_a_computer_would_take_for_a_number_is_refused(put: Put, cell: str) -> None:
    assert refusal(put(f"date,value\n2024-01,1\n2024-02,{cell}\n")).startswith(
        f"data.csv: row 3, column 'value': '{cell}' is no number; allowed are numbers such as -1.25"
    )


def test_points_and_rates_may_be_negative(put: Put) -> None:
    points = replace(put("date,pair,tenor,value\n2024-01,QNKQMT,1m,-12\n", role="forwards"), quote="points")
    assert read_source(points, interval="month", first=None, last=None).frame["value"].tolist() == [-12]
    rates = put("date,value\n2024-01,-0.5\n")
    assert read_source(rates, interval="month", first=None, last=None).frame["value"].tolist() == [-0.5]


def test_a_missing_file(tmp_path: Path) -> None:
    source = Source("spot", tmp_path / "none.csv", "data/none.csv")
    assert refusal(source) == f"data/none.csv: no such file; looked for {tmp_path / 'none.csv'}"


def test_a_directory(tmp_path: Path) -> None:
    assert refusal(Source("spot", tmp_path, "data")) == "data: is a folder; name a file in it"


def test_no_permission(put: Put, monkeypatch: pytest.MonkeyPatch) -> None:
    def denied(self: Path) -> bytes:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "read_bytes", denied)
    assert refusal(put("x")) == "data.csv: may not be read (permission denied); allow reading it"


def test_a_file_where_a_folder_should_be(put: Put) -> None:
    source = put("x")
    line = refusal(replace(source, path=source.path / "more.csv", file="data.csv/more.csv"))
    assert line.startswith("data.csv/more.csv: ")  # Windows says there is no such file, others that it is no folder


@pytest.mark.parametrize(("content", "size"), [(b"", 0), (b"\n \n", 3)])
def test_an_empty_file(put: Put, content: bytes, size: int) -> None:
    assert refusal(put(content)) == f"data.csv: is empty ({size} bytes); expected a header row and data rows"


@pytest.mark.parametrize("content", ["date,value\n", "date,value", "date,value\n\n,\n"])
def test_a_file_with_a_header_only(put: Put, content: str) -> None:
    assert refusal(put(content)) == "data.csv: has a header row and no data row"


def test_text_that_is_no_utf8(put: Put) -> None:
    assert refusal(put("date,index,value\n2024-01,Zürich,1\n".encode("latin-1"))) == (
        "data.csv: row 2, byte 26 is no utf-8; save the file as UTF-8 or declare its encoding, such as encoding = "
        '"latin-1"'
    )


def test_text_that_is_not_in_the_declared_encoding(put: Put) -> None:
    source = replace(put("date,index,value\n2024-01,Zürich,1\n"), encoding="ascii")
    assert refusal(source).startswith("data.csv: row 2, byte 26 is no ascii;")


def archive() -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w") as file:
        file.writestr("xl/workbook.xml", "<workbook/>")
    return buffer.getvalue()


def parquet() -> bytes:
    return pd.DataFrame({"date": ["2024-01"], "value": [1.0]}).to_parquet()


@pytest.mark.parametrize(
    ("content", "what"),
    [
        (archive(), "a zip archive (an .xlsx workbook is one)"),
        (parquet(), "a Parquet file"),
        (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "an old workbook or another compound file"),
        (b"\x1f\x8b\x08\x00", "a gzip archive"),
        (b"%PDF-1.7\n", "a PDF"),
        (b"<!DOCTYPE html><html></html>", "a web page"),
    ],
)
def test_a_file_that_is_not_the_text_its_name_says(put: Put, content: bytes, what: str) -> None:
    assert refusal(put(content)) == f"data.csv: is {what}, not the text its name says; export it as CSV in UTF-8"


def test_a_file_with_nul_bytes(put: Put) -> None:
    content = "date,value\n2024-01,1\n".encode("utf-16-le")
    assert refusal(put(content)) == "data.csv: byte 1 is NUL, so it is no plain text; export it as CSV in UTF-8"


def test_a_parquet_file_that_is_text(put: Put) -> None:
    assert refusal(put("date,value\n2024-01,1\n", "data.parquet")) == (
        "data.parquet: is no Parquet file, whatever its name says; name it .csv if it is text"
    )


@pytest.mark.parametrize("content", [parquet()[:60], b"PAR1" + b"x" * 100 + b"PAR1"])
def test_a_damaged_parquet_file(put: Put, content: bytes) -> None:
    line = refusal(put(content, "data.parquet"))
    assert line.startswith("data.parquet: is a damaged Parquet file (")
    assert line.endswith("); export it again")


def test_a_parquet_file_without_rows(put: Put) -> None:
    content = pd.DataFrame({"date": ["2024-01"], "value": [1.0]}).iloc[:0].to_parquet()
    assert refusal(put(content, "data.parquet")) == "data.parquet: has columns and no data row"


def test_a_parquet_column_of_lists(put: Put) -> None:
    content = pd.DataFrame({"date": ["2024-01"], "value": [[1.0, 2.0]]}).to_parquet()
    line = refusal(put(content, "data.parquet"))
    assert line.startswith("data.parquet: column 'value' holds list<")
    assert line.endswith("; allowed are texts, numbers and dates")


def test_parquet_without_its_package(put: Put, monkeypatch: pytest.MonkeyPatch) -> None:
    source = put(parquet(), "data.parquet")
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    assert refusal(source, ExtraError) == (
        "data.parquet: Parquet needs pyarrow; install carrylab with its parquet extra"
    )
