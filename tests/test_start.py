"""A first study from the heads of files: what is known is filled in, what decides the numbers is asked."""

import re
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from carrylab.cli import main
from carrylab.data.calendar import parse_tenor
from carrylab.data.read import read_market
from carrylab.errors import DataError, StudyError
from carrylab.markets import MARKETS
from carrylab.start import start
from carrylab.study import read_study

DEMO = Path(__file__).parent.parent / "datasets_demo" / "clean"
FILES = (
    "zero_yields.csv",
    "fx_spot.csv",
    "fx_forwards.csv",
    "deposit_rates.csv",
    "equity_price.csv",
    "equity_dividend.csv",
    "equity_total_return.csv",
)
QUESTION = re.compile(r"# (?P<key>\w+) = (?P<value>.*?)\s+# question: ")
DEMO_DAYS = '{ QPD = "act/365f", QVP = "act/365f", QYR = "act/365f", others = "act/360" }'
# What the makers of the demo files know: (role or market, key) -> answer; "" leaves the question unanswered.
ANSWERS = {
    ("zero_yields", "day_count"): "",
    ("deposits", "compounding"): '"simple"',
    ("deposits", "day_count"): DEMO_DAYS,
    ("forwards", "quote"): '"points"',
    ("forwards", "scale"): "{ QNK = 100, others = 10000 }",
}
DECIDES = {"unit", "compounding", "day_count", "quote", "scale", "timing", "basis", "tenor", "home", "legs", "signal"}


def answered(text: str, answers=ANSWERS) -> str:
    """The text with every question answered: as told, or as suggested."""
    place, lines = "", []
    for line in text.splitlines():
        head = re.match(r"(?:# )?\[+(?:market\.data\.)?(\w+)\]+", line)
        found = QUESTION.match(line)
        if head:
            place = head[1]
            line = line.removeprefix("# ")
        elif found:
            value = answers.get((place, found["key"]), found["value"])
            line = f"{found['key']} = {value}" if value else line
        lines.append(line)
    return "\n".join(lines)


def write(folder: Path, name: str, text: str) -> Path:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def begun(folder: Path, name: str, text: str) -> str:
    return start([write(folder, name, text)], folder / "study.toml")


def parities(path: Path) -> dict:
    """Every parity of the study that a file on its own can give, by market kind, name and horizon."""
    study = read_study(path)
    built = [
        (market.kind, parity)
        for market in study.markets
        for parity in MARKETS[market.kind](read_market(market), study.economies)
    ]
    return {(kind, parity.name, parity.horizon): parity for kind, parity in built}


def identity(entity) -> tuple[str, str, str]:
    return entity.economy, entity.currency, entity.maturity and parse_tenor(entity.maturity).canonical


def test_every_open_question_is_named_as_missing(tmp_path) -> None:
    text = start([DEMO / name for name in FILES], tmp_path / "study.toml")
    with pytest.raises(StudyError) as refused:
        read_study(write(tmp_path, "study.toml", text))
    lines = str(refused.value).splitlines()
    for place, key in (
        ("zero_yields", "unit"),
        ("zero_yields", "compounding"),
        ("deposits", "unit"),
        ("deposits", "compounding"),
        ("spot", "quote"),
        ("forwards", "quote"),
        ("dividends", "basis"),
    ):
        assert any(f"data.{place}" in line and f"the key {key} is missing" in line for line in lines), (place, key)
    assert any("the key home is missing" in line for line in lines)
    assert any("the key horizons is missing" in line for line in lines)


def test_nothing_that_decides_the_numbers_is_filled_in(tmp_path) -> None:
    text = start([DEMO / name for name in FILES], tmp_path / "study.toml")
    filled = {line.split(" = ")[0] for line in text.splitlines() if not line.startswith("#") and " = " in line}
    assert filled == {"title", "name", "kind", "interval", "parities", "file", "spread"}
    assert not filled & DECIDES


def test_answers_give_the_arrays_of_the_demo_study(tmp_path) -> None:
    path = write(tmp_path, "study.toml", answered(start([DEMO / name for name in FILES], tmp_path / "study.toml")))
    mine, demo = parities(path), parities(DEMO / "study.toml")
    shared = sorted(set(mine) & set(demo), key=str)
    assert {(kind, name) for kind, name, _ in shared} == {
        ("bonds", "forward-spot"),
        ("bonds", "yield-spread"),
        ("currencies", "uncovered-interest"),
        ("currencies", "forward-discount"),
        ("equities", "dividend-price"),
        ("equities", "carry"),
    }
    # The demo study begins and ends with its files, so both calendars are the same months.
    for key in shared:
        at = {identity(entity): i for i, entity in enumerate(demo[key].entities)}
        pairs = [(i, at[identity(e)]) for i, e in enumerate(mine[key].entities) if identity(e) in at]
        assert len(pairs) >= 6
        for i, j in pairs:
            np.testing.assert_allclose(mine[key].signal[:, i], demo[key].signal[:, j], rtol=0, atol=1e-14)


@pytest.mark.parametrize(
    ("dates", "interval"),
    [
        (("2024-01-31", "2024-02-29", "2024-03-29", "2024-04-30"), "month"),
        (("2024-01", "2024-02", "2024-03", "2024-04"), "month"),
        (("2024-01-01", "2024-01-02", "2024-01-03", "2024-01-04"), "day"),
        (("2024-01-05", "2024-01-12", "2024-01-19", "2024-01-26"), "week"),
        (("2023-Q1", "2023-Q2", "2023-Q3", "2023-Q4"), "quarter"),
        (("2021", "2022", "2023", "2024"), "year"),
    ],
)
def test_interval_from_the_spacing_of_dates(tmp_path, dates, interval) -> None:
    rows = "\n".join(f"{date},USDJPY,{110 + i}" for i, date in enumerate(dates))
    assert f'\ninterval = "{interval}"\n' in begun(tmp_path, "spot.csv", f"date,pair,value\n{rows}\n")


def test_one_date_does_not_tell_the_interval(tmp_path) -> None:
    text = begun(tmp_path, "spot.csv", "date,pair,value\n2024-01-31,USDJPY,147\n")
    assert re.search(r'# interval = "month" +# question: ', text)


def test_order_of_day_and_month_is_asked_where_every_cell_can_be_both(tmp_path) -> None:
    both = begun(tmp_path, "spot.csv", "date,pair,value\n01/02/2024,USDJPY,147\n01/03/2024,USDJPY,148\n")
    assert '# date_order = "dmy"' in both
    told = begun(tmp_path, "spot.csv", "date,pair,value\n31/01/2024,USDJPY,147\n29/02/2024,USDJPY,148\n")
    assert '\ndate_order = "dmy"\n' in told


def test_wide_yields_with_numbered_columns_ask_what_the_numbers_are(tmp_path) -> None:
    text = begun(tmp_path, "yields.csv", "date,r1,r3,r12\n2024-01,5.3,5.2,4.8\n2024-02,5.3,5.2,4.9\n")
    assert '\nspread = "maturity"\n' in text
    assert re.search(r'# columns = \{ r1 = "1m", r3 = "3m", r12 = "12m" \} +# question: ', text)
    assert "numbers run from 4.8 to 5.3" in text


def test_other_names_are_mapped_and_marks_for_missing_listed(tmp_path) -> None:
    text = begun(
        tmp_path,
        "spot.csv",
        "obs_date;ccy;rate\n2024-01-31;JPY;147,2\n2024-02-29;JPY;n/a\n2024-03-29;JPY;151,3\n",
    )
    assert '\ncolumns = { obs_date = "date", ccy = "currency" }\n' in text
    assert '\ndecimal = ","\nmissing = ["n/a"]\n' in text


def test_own_signal_and_legs_become_a_columns_market(tmp_path) -> None:
    rows = "date,country,spread,rx,dy\n2024-01,AA,.01,.02,-.01\n2024-02,AA,.02,.01,.01\n"
    text = begun(tmp_path, "panel.csv", rows)
    with pytest.raises(StudyError, match="signal is missing"):
        read_study(write(tmp_path, "study.toml", text))
    market = read_study(write(tmp_path, "study.toml", answered(text, {}))).markets[0]
    assert market.panel is not None
    assert market.panel.entity == "country"
    assert [leg.column for leg in market.panel.legs] == ["rx", "dy"]
    assert {leg.role for leg in market.panel.legs} == {"other"}


def test_a_file_whose_role_cannot_be_told_is_said_so(tmp_path) -> None:
    text = begun(tmp_path, "growth.csv", "date,QM,QN\n2024-01,2.5,2.4\n2024-02,2.6,2.2\n")
    assert "# growth.csv: its name and its columns (QM, QN) do not tell what it holds." in text


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ("", "is empty"),
        ("date,value\n", "no data row"),
        ("name,value\nAA,1\nBB,2\n", "no column of dates"),
        ("date,name\n2024-01,x\n2024-02,y\n", "no column of numbers"),
        ("date,a\n2024-01,1,2\n", "row 2 has 3 cells"),
        ("PK\x03\x04....", "a zip archive"),
    ],
)
def test_bad_files_are_one_line(tmp_path, content, said) -> None:
    with pytest.raises(DataError, match=said) as refused:
        begun(tmp_path, "bad.csv", content)
    assert "\n" not in str(refused.value)
    assert "bad.csv" in str(refused.value)


def test_missing_file_and_folder_are_one_line(tmp_path) -> None:
    for path, said in ((tmp_path / "none.csv", "no such file"), (tmp_path, "is a folder")):
        with pytest.raises(DataError, match=said):
            start([path], tmp_path / "study.toml")


def test_command_writes_the_study_and_keeps_an_old_one(tmp_path) -> None:
    path = tmp_path / "mine.toml"
    done = CliRunner().invoke(main, ["start", str(DEMO / "fx_spot.csv"), "--study", str(path)])
    assert done.exit_code == 0, done.output
    assert path.read_text(encoding="utf-8") == start([DEMO / "fx_spot.csv"], path)
    again = CliRunner().invoke(main, ["start", str(DEMO / "fx_spot.csv"), "--study", str(path)])
    assert again.exit_code == 2
    assert "exists already" in again.output
