"""States from files: spells, labels and what was known when, each by hand; and what is refused."""

from pathlib import Path

import numpy as np
import pytest

from carrylab.data.calendar import make_calendar, parse_tenor
from carrylab.data.states import read_labels
from carrylab.errors import DataError
from carrylab.options import Source

# 2020-01 to 2020-06.
CALENDAR = make_calendar("month", np.arange(2020 * 12, 2020 * 12 + 6))


def labels(folder: Path, text: str, **declared: object) -> list[str]:
    path = folder / "states.csv"
    path.write_text(text, encoding="utf-8")
    return list(read_labels(Source(role="slump", path=path, file="states.csv", **declared), "slump", CALENDAR))


def test_a_spell_covers_both_its_ends(tmp_path: Path) -> None:
    found = labels(tmp_path, "from,until\n2019-11,2020-01\n2020-03,2020-04\n")
    assert found == ["slump", "not slump", "slump", "slump", "not slump", "not slump"]


def test_a_spell_known_two_months_later_moves_by_two_months(tmp_path: Path) -> None:
    found = labels(tmp_path, "from,until\n2020-02,2020-02\n", known_after=parse_tenor("2m"))
    # From 1 April (1 February and two months) to 30 April: at the end of April it was known to hold.
    assert found == ["not slump"] * 3 + ["slump"] + ["not slump"] * 2


def test_ones_and_zeros_and_holes(tmp_path: Path) -> None:
    found = labels(tmp_path, "date,value\n2020-01,1\n2020-02,0\n2020-03,\n2020-05,1\n")
    assert found == ["slump", "not slump", "", "", "slump", ""]


def test_labels_and_the_newest_known(tmp_path: Path) -> None:
    text = "date,regime\n2019-12-31,tight\n2020-03-31,loose\n"
    found = labels(tmp_path, text, columns={"regime": "value"}, known_after=parse_tenor("1m"))
    # Known from 31 January and from 30 April.
    assert found == ["slump: tight"] * 3 + ["slump: loose"] * 3


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("date,value\n2020-01,1\n2020-01,0\n", "states.csv: row 2: date '2020-01' stands 2 times"),
        ("from,until\n2020-03,2020-01\n", "states.csv: row 2: until '2020-01' lies before from '2020-03'"),
        ("from,until\n03/2020,2020-01\n", "states.csv: row 2: is no date"),
        ("date,state\n2020-01,1\n", "states.csv: no column 'value'"),
    ],
)
def test_what_cannot_be_read_is_one_line(tmp_path: Path, text: str, said: str) -> None:
    with pytest.raises(DataError) as refused:
        labels(tmp_path, text)
    assert said in str(refused.value)
    assert len(str(refused.value).splitlines()) == 1
