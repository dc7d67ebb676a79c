"""Dates are ISO 8601, or day and month in a declared order, and what cannot be read in one way is refused."""

import datetime
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from declared import Put
from hypothesis import given
from hypothesis import strategies as st

from carrylab.data.calendar import Interval
from carrylab.data.dates import bound, read_dates, read_stamp
from carrylab.errors import DataError

DATES = st.dates(datetime.date(1, 1, 1), datetime.date(9999, 12, 31))


@pytest.mark.parametrize(
    ("text", "day", "precision"),
    [
        ("2024-01-31", "2024-01-31", "day"),
        ("2024-02", "2024-02-29", "month"),
        ("2023-02", "2023-02-28", "month"),
        ("2024-Q1", "2024-03-31", "quarter"),
        ("2024-Q4", "2024-12-31", "quarter"),
        ("2024-W05", "2024-02-04", "week"),
        ("2020-W53", "2021-01-03", "week"),
        ("2024", "2024-12-31", "year"),
        ("2024-01-31T00:00:00", "2024-01-31", "day"),
        ("2024-01-31 17:30", "2024-01-31", "day"),
        ("2024-01-31T17:30:00.000+01:00", "2024-01-31", "day"),
        ("2024-01-31T00:00:00Z", "2024-01-31", "day"),
    ],
)
def test_iso_dates_stand_at_the_last_day_they_name(text: str, day: str, precision: str) -> None:
    stamp = read_stamp(text, None)
    assert (str(stamp.day), stamp.precision) == (day, precision)


@pytest.mark.parametrize(
    ("text", "order", "day"),
    [
        ("03/04/2024", "dmy", "2024-04-03"),
        ("03/04/2024", "mdy", "2024-03-04"),
        ("3.4.2024", "dmy", "2024-04-03"),
        ("31-01-2024 12:00", "dmy", "2024-01-31"),
        ("2024/03/04", "ymd", "2024-03-04"),
        ("2024-03-04", "ymd", "2024-03-04"),
        ("2024-03", "ymd", "2024-03-31"),
    ],
)
def test_a_declared_order_is_followed(text: str, order: str, day: str) -> None:
    assert str(read_stamp(text, order).day) == day


@given(DATES)
def test_every_day_is_read_back_in_every_order(day: datetime.date) -> None:
    year = f"{day.year:04d}"
    assert read_stamp(day.isoformat(), None).day == day
    assert read_stamp(f"{day.day:02d}/{day.month:02d}/{year}", "dmy").day == day
    assert read_stamp(f"{day.month}-{day.day}-{year}", "mdy").day == day
    assert read_stamp(f"{year}.{day.month}.{day.day}", "ymd").day == day


@pytest.mark.parametrize(
    ("text", "order", "why"),
    [
        ("03/04/2024", None, "may have day or month first; declare date_order"),
        ("31/12/2024", None, "may have day or month first"),
        ("2024/12/31", None, "declare date_order"),
        ("31/12/24", "dmy", 'is no date in the order declared; date_order = "dmy" allows 31/01/2024'),
        ("2024-12-31", "dmy", "is no date in the order declared"),
        ("2024/12/31", "mdy", 'date_order = "mdy" allows 01/31/2024'),
        ("31/12/2024", "mdy", "does not exist (month must be in 1..12"),
        ("2024-02-30", None, "does not exist (day"),
        ("2023-02-29", None, "does not exist (day"),
        ("2024-13", None, "does not exist (month must be in 1..12"),
        ("2024-13-01", None, "does not exist (month must be in 1..12"),
        ("2024-00-10", None, "does not exist (month must be in 1..12"),
        ("2023-W53", None, "does not exist (no week 53 in 2023)"),
        ("2024-W00", None, "does not exist (no week 0 in 2024)"),
        ("2024-Q5", None, "is no date; allowed are 2024-01-31, 2024-01, 2024-Q1, 2024-W05 and 2024"),
        ("0000", None, "is no date"),
        ("0000-Q1", None, "is no date"),
        ("24-01-31", None, "may have day or month first"),
        ("20240131", None, "is no date"),
        ("45322", None, "is no date"),
        ("2024.0", None, "is no date"),
        ("Jan 2024", None, "is no date"),
        ("2024-01-31 or so", None, "is no date"),
        ("2024 12:00", None, "is no date"),
        ("", None, "is no date"),
        ("٢٠٢٤", None, "is no date"),
    ],
)
def test_what_is_no_date_is_refused_with_the_reason(text: str, order: str | None, why: str) -> None:
    with pytest.raises(ValueError) as refused:  # noqa: PT011, the whole message is compared below
        read_stamp(text, order)
    assert why in str(refused.value)


def test_dates_become_days_and_period_numbers_in_the_order_of_the_rows(put: Put) -> None:
    cells = pd.Series(["2024-03", "2024-01-15", " 2024-03-31 ", "2024-01-15"], index=[2, 3, 4, 5])
    days, numbers = read_dates(put("x"), cells, "month")
    assert [str(day) for day in days] == ["2024-03-31", "2024-01-15", "2024-03-31", "2024-01-15"]
    assert numbers.tolist() == [24290, 24288, 24290, 24288]  # 2024 x 12 + 2 and + 0


def test_the_first_refused_row_is_named(put: Put) -> None:
    cells = pd.Series(["2024-03", "2024-13", "2024-00"], index=[2, 3, 4])
    with pytest.raises(DataError) as refused:
        read_dates(put("x"), cells, "month")
    assert str(refused.value).startswith("data.csv: row 3: date '2024-13' does not exist (month must be in 1..12)")


@pytest.mark.parametrize(
    ("text", "interval", "precision"),
    [
        ("2024-01", "day", "month"),
        ("2024-01", "week", "month"),
        ("2024-Q1", "month", "quarter"),
        ("2024", "quarter", "year"),
    ],
)
def test_a_date_coarser_than_the_interval_is_refused(put: Put, text: str, interval: Interval, precision: str) -> None:
    with pytest.raises(DataError) as refused:
        read_dates(put("x"), pd.Series([text], index=[7]), interval)
    assert str(refused.value) == (
        f"data.csv: row 7: date '{text}' names a {precision}, too coarse for the study's interval '{interval}'; give "
        "finer dates or a coarser interval"
    )


def test_a_coarse_date_stands_at_the_end_of_its_period_where_that_is_allowed(put: Put) -> None:
    days, _ = read_dates(put("x"), pd.Series(["2024-Q1", "2023"]), "month", coarse=True)
    assert [str(day) for day in days] == ["2024-03-31", "2023-12-31"]


def test_a_finer_date_is_mapped_to_its_period(put: Put) -> None:
    source = replace(put("x"), date_order="dmy")
    _, numbers = read_dates(source, pd.Series(["31/03/2024", "01/04/2024"]), "quarter")
    assert numbers.tolist() == [2024 * 4, 2024 * 4 + 1]


@pytest.mark.parametrize(
    ("text", "first", "last"),
    [
        ("2024", "2024-01-01", "2024-12-31"),
        ("2024-Q2", "2024-04-01", "2024-06-30"),
        ("2024-02", "2024-02-01", "2024-02-29"),
        ("2024-W05", "2024-01-29", "2024-02-04"),
        ("2024-02-10", "2024-02-10", "2024-02-10"),
        ("1960-01", "1960-01-01", "1960-01-31"),
    ],
)
def test_from_is_the_first_and_until_the_last_day_of_what_it_names(text: str, first: str, last: str) -> None:
    assert bound(text, upper=False) == np.datetime64(first)
    assert bound(text, upper=True) == np.datetime64(last)


def test_no_bound_is_none() -> None:
    assert bound(None, upper=True) is None
