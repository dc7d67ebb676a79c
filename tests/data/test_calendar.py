"""Lags and leads are counted in periods of the calendar, never in rows."""

import datetime
from itertools import pairwise

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from carrylab.data.calendar import (
    INTERVALS,
    Interval,
    Tenor,
    add,
    horizon_years,
    label,
    last_day,
    lead,
    make_calendar,
    ordinal,
    parse_tenor,
    steps_in,
    window,
)
from carrylab.data.dates import read_stamp

DATES = st.dates(datetime.date(1800, 1, 1), datetime.date(2200, 12, 31))


def days(*texts: str) -> np.ndarray:
    return np.array(texts, dtype="datetime64[D]")


def business_days(first: str, last: str) -> np.ndarray:
    return pd.bdate_range(first, last).to_numpy().astype("datetime64[D]")


@pytest.mark.parametrize(
    ("text", "months", "length", "canonical"),
    [
        ("12m", 12, 0, "12m"),
        ("1y", 12, 0, "12m"),
        ("4Q", 12, 0, "12m"),
        (" 5 y ", 60, 0, "60m"),
        ("30d", 0, 30, "30d"),
        ("2w", 0, 14, "14d"),
    ],
)
def test_lengths_of_time(text: str, months: int, length: int, canonical: str) -> None:
    tenor = parse_tenor(text)
    assert (tenor.months, tenor.days, tenor.canonical) == (months, length, canonical)


@pytest.mark.parametrize("text", ["", "12", "m", "1.5y", "-3m", "3 months", "12m7d", "1h"])
def test_what_is_no_length_of_time_is_refused(text: str) -> None:
    with pytest.raises(ValueError, match=r"is no length of time; write a number and d, w, m, q or y"):
        parse_tenor(text)


def test_lengths_are_compared_and_moved_by_what_they_last() -> None:
    year, month = parse_tenor("1y"), parse_tenor("1m")
    assert year == parse_tenor("12m")
    assert hash(year) == hash(parse_tenor("4q"))
    assert str(year) == "1y"
    assert year - month == Tenor(months=11)
    assert str(year - month) == "11m"
    assert month + parse_tenor("7d") == Tenor(1, 7)
    assert (year - parse_tenor("7d")).canonical == "12m-7d"
    assert month.times(12) == year
    assert str(parse_tenor("1w").times(3)) == "3w"
    assert str(parse_tenor("3w") - parse_tenor("1w")) == "2w"


def test_lengths_are_ordered_by_what_they_last() -> None:
    texts = ["1y", "400d", "1m", "30d", "2w", "13m"]
    assert [str(tenor) for tenor in sorted(map(parse_tenor, texts))] == ["2w", "30d", "1m", "1y", "13m", "400d"]
    assert parse_tenor("12m") <= parse_tenor("1y")


def test_a_month_is_a_twelfth_and_a_day_a_365th_of_a_year() -> None:
    assert parse_tenor("1m").years == 1 / 12
    assert parse_tenor("30d").years == 30 / 365
    assert Tenor(1, 5).years == 1 / 12 + 5 / 365


# ISO 8601 weeks: the first week of a year is the one with its first Thursday (ISO 8601-1:2019, 3.1.1.23).
@pytest.mark.parametrize(
    ("day", "week"),
    [
        ("2005-01-01", "2004-W53"),
        ("2005-01-03", "2005-W01"),
        ("2008-12-29", "2009-W01"),
        ("2010-01-03", "2009-W53"),
        ("1970-01-01", "1970-W01"),
        ("1969-12-28", "1969-W52"),
    ],
)
def test_weeks_are_iso_weeks(day: str, week: str) -> None:
    assert label(int(ordinal(days(day), "week")[0]), "week") == week


@pytest.mark.parametrize(
    ("interval", "name", "end"),
    [
        ("day", "2024-02-28", "2024-02-28"),
        ("week", "2024-W09", "2024-03-03"),
        ("month", "2024-02", "2024-02-29"),
        ("quarter", "2024-Q1", "2024-03-31"),
        ("year", "2024", "2024-12-31"),
    ],
)
def test_the_period_of_a_day(interval: Interval, name: str, end: str) -> None:
    number = ordinal(days("2024-02-28"), interval)
    assert label(int(number[0]), interval) == name
    assert str(last_day(number, interval)[0]) == end


@given(DATES, st.sampled_from(INTERVALS))
def test_a_day_lies_in_its_period_and_the_next_day_after_the_last_in_the_next(
    day: datetime.date, interval: Interval
) -> None:
    number = ordinal(np.array([day], dtype="datetime64[D]"), interval)
    end = last_day(number, interval)
    assert end[0] >= np.datetime64(day)
    assert ordinal(end, interval)[0] == number[0]
    assert ordinal(end + 1, interval)[0] == number[0] + 1


@given(DATES, st.sampled_from(INTERVALS))
def test_a_label_reads_back_as_the_last_day_of_its_period(day: datetime.date, interval: Interval) -> None:
    number = ordinal(np.array([day], dtype="datetime64[D]"), interval)
    stamp = read_stamp(label(int(number[0]), interval), None)
    assert stamp.precision == interval
    assert np.datetime64(stamp.day) == last_day(number, interval)[0]


# The end-of-month rule of the money and currency markets: common practice.
@pytest.mark.parametrize(
    ("day", "tenor", "moved"),
    [
        ("2024-01-31", "1m", "2024-02-29"),
        ("2024-01-30", "1m", "2024-02-29"),
        ("2023-02-28", "1m", "2023-03-31"),
        ("2024-02-28", "1m", "2024-03-28"),
        ("2024-02-29", "12m", "2025-02-28"),
        ("2023-02-28", "1y", "2024-02-29"),
        ("2024-01-15", "1m", "2024-02-15"),
        ("2024-12-31", "2w", "2025-01-14"),
        ("1969-12-31", "2m", "1970-02-28"),
    ],
)
def test_a_day_moved_on(day: str, tenor: str, moved: str) -> None:
    assert str(add(days(day), parse_tenor(tenor))[0]) == moved


@given(st.lists(DATES, min_size=2, max_size=30), st.integers(0, 40), st.integers(0, 40))
def test_later_days_never_move_before_earlier_ones(found: list[datetime.date], months: int, extra: int) -> None:
    moved = add(np.array(sorted(found), dtype="datetime64[D]"), Tenor(months, extra))
    assert (np.diff(moved).astype(int) >= 0).all()


def test_a_calendar_of_months_has_no_holes() -> None:
    calendar = make_calendar("month", ordinal(days("2024-04-30", "2024-01-31"), "month"))
    assert [calendar.label(row) for row in range(len(calendar))] == ["2024-01", "2024-02", "2024-03", "2024-04"]
    assert [str(day) for day in calendar.days] == ["2024-01-31", "2024-02-29", "2024-03-31", "2024-04-30"]


def test_a_calendar_of_days_leaves_out_days_without_observation() -> None:
    calendar = make_calendar("day", ordinal(days("2024-01-05", "2024-01-08", "2024-01-05"), "day"))
    assert [calendar.label(row) for row in range(len(calendar))] == ["2024-01-05", "2024-01-08"]


def test_rows_are_located_by_period_number() -> None:
    calendar = make_calendar("day", ordinal(days("2024-01-05", "2024-01-08"), "day"))
    wanted = ordinal(days("2024-01-08", "2024-01-06", "2024-01-05", "2023-01-01", "2025-01-01"), "day")
    assert calendar.locate(wanted).tolist() == [1, -1, 0, -1, -1]


@pytest.mark.parametrize(
    ("interval", "horizon", "steps"),
    [
        ("month", "12m", 12),
        ("month", "1q", 3),
        ("month", "30d", None),
        ("quarter", "12m", 4),
        ("quarter", "4m", None),
        ("year", "5y", 5),
        ("year", "18m", None),
        ("week", "2w", 2),
        ("week", "14d", 2),
        ("week", "10d", None),
        ("week", "1m", None),
        ("day", "5d", 5),
        ("day", "1m", None),
        ("day", "1w", None),
    ],
)
def test_whole_periods_in_a_horizon(interval: Interval, horizon: str, steps: int | None) -> None:
    assert steps_in(parse_tenor(horizon), interval) == steps


def test_a_horizon_in_trading_days_is_measured_by_252_a_year() -> None:
    assert horizon_years(parse_tenor("63d"), "day") == 0.25  # common practice: 252 trading days a year
    assert horizon_years(parse_tenor("1w"), "day") == 7 / 365
    assert horizon_years(parse_tenor("2w"), "week") == 14 / 365
    assert horizon_years(parse_tenor("3m"), "day") == 0.25


def test_whole_periods_end_that_many_periods_on_and_overlap_one_less() -> None:
    calendar = make_calendar("month", np.arange(6) + 2024 * 12)
    found = window(calendar, parse_tenor("3m"))
    assert found.ends.tolist() == [3, 4, 5, -1, -1, -1]
    assert found.earliest.tolist() == found.ends.tolist()
    assert found.overlap == 2
    assert window(calendar, parse_tenor("1m")).overlap == 0


def test_a_horizon_longer_than_the_calendar_has_no_outcome() -> None:
    calendar = make_calendar("month", np.arange(6) + 2024 * 12)
    assert (window(calendar, parse_tenor("12m")).ends == -1).all()
    short = make_calendar("day", ordinal(business_days("2024-01-01", "2024-01-10"), "day"))
    assert (window(short, parse_tenor("1m")).ends == -1).all()


def test_a_month_calendar_refuses_a_horizon_in_days() -> None:
    calendar = make_calendar("month", np.arange(6) + 2024 * 12)
    with pytest.raises(ValueError, match="horizon 30d is no whole number of months"):
        window(calendar, parse_tenor("30d"))


def outcome_days(max_gap: int | None = None) -> dict[str, str]:
    """Origin day -> outcome day of one month ahead on the business days of three months."""
    calendar = make_calendar("day", ordinal(business_days("2024-01-01", "2024-03-29"), "day"))
    found = window(calendar, parse_tenor("1m"), max_gap)
    return {str(calendar.days[row]): str(calendar.days[end]) for row, end in enumerate(found.ends.tolist()) if end >= 0}


def test_a_month_on_a_day_calendar_ends_at_the_last_observed_day_on_or_before() -> None:
    ends = outcome_days()
    assert ends["2024-01-31"] == "2024-02-29"
    assert ends["2024-01-30"] == "2024-02-29"
    assert ends["2024-02-02"] == "2024-03-01"  # 2 March 2024 is a Saturday
    assert ends["2024-02-28"] == "2024-03-28"
    assert "2024-02-29" not in ends  # the month end of 31 March lies past the calendar


def test_no_outcome_stands_more_than_the_gap_before_the_end_of_its_horizon() -> None:
    assert "2024-02-02" not in outcome_days(max_gap=0)
    assert outcome_days(max_gap=1)["2024-02-02"] == "2024-03-01"
    assert "2024-02-03" not in outcome_days()


def test_overlap_on_a_day_calendar_is_the_most_origins_in_one_horizon_less_one() -> None:
    # January 2024 has 23 business days, so 23 origins lie in [1 January, 1 February).
    calendar = make_calendar("day", ordinal(business_days("2024-01-01", "2024-03-29"), "day"))
    assert window(calendar, parse_tenor("1m")).overlap == 22
    assert window(calendar, parse_tenor("5d")).overlap == 4
    assert window(calendar, parse_tenor("1w")).overlap == 4


def test_a_week_on_a_day_calendar_is_a_week_of_the_calendar_whatever_was_observed() -> None:
    seen = days("2024-01-02", "2024-01-03", "2024-01-09", "2024-01-10", "2024-01-11")
    calendar = make_calendar("day", ordinal(seen, "day"))
    assert window(calendar, parse_tenor("1w")).ends.tolist() == [2, 3, -1, -1, -1]
    assert window(calendar, parse_tenor("2d")).ends.tolist() == [2, 3, 4, -1, -1]


def test_thirty_days_on_a_week_calendar_hold_four_further_origins() -> None:
    found = window(make_calendar("week", np.arange(2800, 2820)), parse_tenor("30d"))
    # Sundays 7, 14, 21 and 28 days on lie inside thirty days; the last of them is read.
    assert found.overlap == 4
    assert found.ends[:2].tolist() == [4, 5]


def test_a_month_on_a_week_calendar_always_finds_a_week() -> None:
    calendar = make_calendar("week", ordinal(days("2024-01-07", "2024-12-29"), "week"))
    found = window(calendar, parse_tenor("1m"))
    whole = found.ends >= 0
    assert whole.sum() == 47  # from 7 January to 24 November, 1 December + 1m being past the end
    late = add(calendar.days, parse_tenor("1m"))[whole] - calendar.days[found.ends[whole]]
    assert late.min() >= np.timedelta64(0, "D")
    assert late.max() <= np.timedelta64(6, "D")
    assert found.overlap == 4  # five Sundays fit into one month


def test_a_hole_is_no_neighbour_on_an_exact_window() -> None:
    calendar = make_calendar("month", np.arange(4) + 2024 * 12)
    values = np.array([1.0, np.nan, 3.0, 4.0])
    assert np.array_equal(lead(values, window(calendar, parse_tenor("1m"))), [np.nan, 3, 4, np.nan], equal_nan=True)


def test_a_lead_takes_the_last_observation_of_its_own_series_within_the_gap() -> None:
    calendar = make_calendar("day", ordinal(business_days("2024-01-01", "2024-03-29"), "day"))
    row = {str(day): at for at, day in enumerate(calendar.days)}
    values = np.column_stack([np.arange(len(calendar), dtype=float)] * 2)
    values[row["2024-02-29"], 0] = np.nan
    values[row["2024-02-23"] : row["2024-02-29"] + 1, 1] = np.nan
    led = lead(values, window(calendar, parse_tenor("1m")))
    assert led[row["2024-01-31"], 0] == row["2024-02-28"]
    assert np.isnan(led[row["2024-01-31"], 1])  # its newest, of 22 February, is seven days old
    assert led[row["2024-01-26"], 1] == row["2024-02-22"]  # 26 February is a hole, four days after 22 February


@given(st.integers(1, 5), st.integers(3, 30), st.data())
def test_a_lead_by_whole_periods_is_a_shift(steps: int, T: int, data: st.DataObject) -> None:
    calendar = make_calendar("quarter", np.arange(T) + 4 * 2000)
    cells = st.one_of(st.just(np.nan), st.floats(-5, 5))
    values = np.array(data.draw(st.lists(cells, min_size=2 * T, max_size=2 * T))).reshape(T, 2)
    led = lead(values, window(calendar, Tenor(months=3 * steps)))
    shifted = pd.DataFrame(values).shift(-steps).to_numpy()
    assert np.array_equal(led, shifted, equal_nan=True)


@given(st.sets(st.integers(19000, 19400), min_size=5, max_size=150), st.integers(1, 3))
def test_no_outcome_stands_at_its_origin_or_after_its_horizon(found: set[int], months: int) -> None:
    calendar = make_calendar("day", np.array(sorted(found)))
    at = window(calendar, Tenor(months=months))
    whole = np.flatnonzero(at.ends >= 0)
    assert (at.earliest[whole] > whole).all()
    assert (calendar.days[at.ends[whole]] <= add(calendar.days[whole], Tenor(months=months))).all()
    gaps = add(calendar.days[whole], Tenor(months=months)) - calendar.days[at.earliest[whole]]
    assert (gaps <= np.timedelta64(5, "D")).all()
    assert all(later >= earlier for earlier, later in pairwise(at.ends[whole]))
