"""The study calendar: dates become periods, and every lag or lead is a number of periods, never of rows.

A `Tenor` is a length of time (a horizon, a maturity). A `Calendar` is an unbroken run of periods; on the
day interval the periods are the days on which anything was observed, so a holiday is no period. A `Window`
says, for one horizon, where the outcome of each origin stands and how far outcomes overlap.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import Literal, get_args

import numpy as np
import numpy.typing as npt

Interval = Literal["day", "week", "month", "quarter", "year"]
INTERVALS: tuple[str, ...] = get_args(Interval)
Days = npt.NDArray[np.datetime64]
Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]

MONTHS_IN: dict[str, int] = {"month": 1, "quarter": 3, "year": 12}
TRADING_DAYS_A_YEAR = 252  # common practice
MAX_GAP_DAYS: dict[str, int] = {"day": 5, "week": 6}
_TENOR = re.compile(r"\s*(\d+)\s*([dwmqy])\s*", re.IGNORECASE)
_MONTHS = {"m": 1, "q": 3, "y": 12}
_DAYS = {"d": 1, "w": 7}


@dataclass(frozen=True, slots=True)
class Tenor:
    """A length of time: whole months plus whole days.

    `text` is how the user wrote it and takes no part in comparison: 12m and 1y are equal.
    """

    months: int = 0
    days: int = 0
    text: str = field(default="", compare=False)

    @property
    def years(self) -> float:
        """Length in years: a month is 1/12, a day 1/365."""
        return self.months / 12 + self.days / 365

    def __str__(self) -> str:
        if self.text:
            return self.text
        return self.canonical

    @property
    def canonical(self) -> str:
        """The tenor in months, or in days where it has no months: `12m`, `7d`, `12m-7d`."""
        if not self.days:
            return f"{self.months}m"
        if not self.months:
            return f"{self.days}d"
        return f"{self.months}m{self.days:+d}d"

    @property
    def in_weeks(self) -> bool:
        """Whether it was given in weeks, which are calendar weeks on every interval."""
        return self.text.endswith("w")

    def __lt__(self, other: Tenor) -> bool:
        return self.years < other.years

    def __le__(self, other: Tenor) -> bool:
        return self.years <= other.years

    def __add__(self, other: Tenor) -> Tenor:
        return _tenor(self.months + other.months, self.days + other.days, self.in_weeks and other.in_weeks)

    def __sub__(self, other: Tenor) -> Tenor:
        return _tenor(self.months - other.months, self.days - other.days, self.in_weeks and other.in_weeks)

    def times(self, count: int) -> Tenor:
        """`count` of these lengths one after the other."""
        return _tenor(self.months * count, self.days * count, self.in_weeks)


def _tenor(months: int, days: int, in_weeks: bool) -> Tenor:
    return Tenor(months, days, f"{days // 7}w" if in_weeks else "")


def parse_tenor(text: str) -> Tenor:
    """Read `30d`, `2w`, `12m`, `4q` or `5y`; raise ValueError for anything else.

    >>> parse_tenor("1y") == parse_tenor("12m")
    True
    """
    found = _TENOR.fullmatch(text)
    if not found:
        raise ValueError(f"{text!r} is no length of time; write a number and d, w, m, q or y, such as 12m")
    count, unit = int(found[1]), found[2].lower()
    if unit in _MONTHS:
        return Tenor(months=count * _MONTHS[unit], text=f"{count}{unit}")
    return Tenor(days=count * _DAYS[unit], text=f"{count}{unit}")


def ordinal(days: Days, interval: Interval) -> Ints:
    """Period numbers of calendar days: months, quarters or years since year 0, ISO weeks or days since 1970."""
    stamp = days.astype("datetime64[D]")
    if interval == "day":
        return stamp.astype(np.int64)
    if interval == "week":
        return (stamp.astype(np.int64) + 3) // 7
    months = stamp.astype("datetime64[M]").astype(np.int64) + 1970 * 12
    return months // MONTHS_IN[interval]


def last_day(ordinals: Ints, interval: Interval) -> Days:
    """Last calendar day of each period (Sunday for a week)."""
    if interval == "day":
        return ordinals.astype("datetime64[D]")
    if interval == "week":
        return (ordinals * 7 + 3).astype("datetime64[D]")
    months = (ordinals + 1) * MONTHS_IN[interval] - 1970 * 12
    first_of_next = months.astype("datetime64[M]").astype("datetime64[D]").astype(np.int64)
    return (first_of_next - 1).astype("datetime64[D]")


def add(days: Days, tenor: Tenor) -> Days:
    """Each day moved on by `tenor`; the end of a month stays the end of a month."""
    stamp = days.astype("datetime64[D]")
    if tenor.months:
        month = stamp.astype("datetime64[M]")
        target = month + tenor.months
        length = (target + 1).astype("datetime64[D]") - np.timedelta64(1, "D")
        is_end = (stamp + 1).astype("datetime64[M]") > month
        moved = target.astype("datetime64[D]") + (stamp - month.astype("datetime64[D]"))
        stamp = np.where(is_end, length, np.minimum(moved, length))
    return (stamp.astype(np.int64) + tenor.days).astype("datetime64[D]")


@dataclass(frozen=True, slots=True, eq=False)
class Calendar:
    """An unbroken run of T periods.

    `ordinals` (T,) are the period numbers of `ordinal`; consecutive, except that the day interval leaves
    out days on which nothing was observed. `days` (T,) is the last calendar day of each period.
    """

    interval: Interval
    ordinals: Ints
    days: Days

    def __len__(self) -> int:
        return len(self.ordinals)

    def locate(self, ordinals: Ints) -> Ints:
        """Row of each period number on this calendar, -1 where it is not on it."""
        at = np.searchsorted(self.ordinals, ordinals)
        at = np.minimum(at, len(self.ordinals) - 1)
        return np.where(self.ordinals[at] == ordinals, at, -1)

    def label(self, row: int) -> str:
        """The period's ISO 8601 name, or 2024-Q1 for a quarter."""
        return label(int(self.ordinals[row]), self.interval)


def label(number: int, interval: Interval) -> str:
    """Name of one period number: 2024, 2024-Q1, 2024-01, 2024-W05 or 2024-01-31."""
    if interval == "year":
        return f"{number:04d}"
    if interval == "quarter":
        return f"{number // 4:04d}-Q{number % 4 + 1}"
    if interval == "month":
        return f"{number // 12:04d}-{number % 12 + 1:02d}"
    day = last_day(np.array([number]), interval)[0]
    if interval == "week":
        year, week, _ = day.item().isocalendar()
        return f"{year:04d}-W{week:02d}"
    return str(day)


def make_calendar(interval: Interval, observed: Ints) -> Calendar:
    """The calendar that covers every observed period number (for days: exactly the observed ones)."""
    seen = np.unique(observed)
    numbers = seen if interval == "day" else np.arange(seen[0], seen[-1] + 1, dtype=np.int64)
    return Calendar(interval, numbers, last_day(numbers, interval))


@dataclass(frozen=True, slots=True, eq=False)
class Window:
    """Where the outcomes of one horizon stand, for each of the T origins.

    `ends` (T,): row in which the outcome is read, -1 past the end of the calendar. `earliest` (T,): the oldest
    row that may stand in for it (equal to `ends` where the horizon is a whole number of periods).
    `overlap`: most origins inside one horizon, less one.
    """

    ends: Ints
    earliest: Ints
    overlap: int


def steps_in(horizon: Tenor, interval: Interval) -> int | None:
    """Whole periods in a horizon, or None where it is no whole number of them.

    On the day interval `5d` is five observed days; a week is seven days of the calendar, whatever was observed.
    """
    if interval in MONTHS_IN:
        size = MONTHS_IN[interval]
        return horizon.months // size if not horizon.days and horizon.months % size == 0 else None
    if horizon.months:
        return None
    if interval == "day":
        return None if horizon.in_weeks else horizon.days
    return horizon.days // 7 if horizon.days % 7 == 0 else None


def horizon_years(horizon: Tenor, interval: Interval) -> float:
    """Length of a horizon in years; on the day interval a horizon in days counts trading days, 252 a year."""
    if interval == "day" and steps_in(horizon, interval) is not None:
        return horizon.days / TRADING_DAYS_A_YEAR
    return horizon.years


def window(calendar: Calendar, horizon: Tenor, max_gap: int | None = None) -> Window:
    """Find the row that ends each origin's horizon.

    A whole number of periods is counted in periods. Otherwise (a month on a day or week calendar, a week on a day
    calendar) the outcome is read in the last period that ends on or before t + h, at most `max_gap` days earlier (5 on
    a day calendar, 6 on a week calendar). Raises ValueError where a month, quarter or year calendar cannot hold the
    horizon.
    """
    T = len(calendar)
    steps = steps_in(horizon, calendar.interval)
    if steps is not None:
        ends = np.arange(T, dtype=np.int64) + steps
        ends[ends >= T] = -1
        return Window(ends, ends, steps - 1)
    if calendar.interval in MONTHS_IN:
        raise ValueError(f"horizon {horizon} is no whole number of {calendar.interval}s")
    gap = MAX_GAP_DAYS[calendar.interval] if max_gap is None else max_gap
    target = add(calendar.days, horizon)
    ends = np.searchsorted(calendar.days, target, side="right").astype(np.int64) - 1
    earliest = np.searchsorted(calendar.days, target - np.timedelta64(gap, "D"), side="left").astype(np.int64)
    earliest = np.maximum(earliest, np.arange(T) + 1)
    inside = np.searchsorted(calendar.days, target, side="left") - np.arange(T)
    beyond = (target > calendar.days[-1]) | (earliest > ends)
    return Window(np.where(beyond, -1, ends), np.where(beyond, -1, earliest), int(inside.max()) - 1)


def lead(values: Floats, at: Window) -> Floats:
    """The value standing at the end of each origin's horizon; `values` is (T, ...) with NaN for a hole.

    Where the window leaves room, the last observation in it is taken, series by series; a hole in an exact
    window stays a hole.
    """
    rows = np.arange(len(values)).reshape((-1,) + (1,) * (values.ndim - 1))
    newest = np.maximum.accumulate(np.where(np.isnan(values), -1, rows), axis=0)
    ends = np.maximum(at.ends, 0)
    source = newest[ends]
    known = (at.ends >= 0).reshape(rows.shape) & (source >= at.earliest.reshape(rows.shape))
    taken = np.take_along_axis(values, np.maximum(source, 0), axis=0)
    return np.where(known, taken, np.nan)
