"""Date cells: ISO 8601, or day and month in a declared order; anything else is refused with its row."""

from __future__ import annotations

import datetime
import re
from dataclasses import dataclass

import numpy as np
import pandas as pd

from carrylab.data.calendar import INTERVALS, Days, Interval, Ints, last_day, ordinal
from carrylab.errors import DataError
from carrylab.options import Source

CLOCK = r"(?:[T ]\d{2}:\d{2}(?::\d{2}(?:\.\d+)?)?(?:Z|[+-]\d{2}:?\d{2})?)?"
ISO = re.compile(
    r"(?P<year>(?!0000)\d{4})"
    r"(?:-Q(?P<quarter>[1-4])|-W(?P<week>\d{2})|-(?P<month>\d{2})(?:-(?P<day>\d{2})" + CLOCK + r")?)?",
    re.ASCII,
)
LOCAL = re.compile(r"(\d+)[./-](\d+)[./-](\d+)" + CLOCK, re.ASCII)
ALLOWED = "allowed are 2024-01-31, 2024-01, 2024-Q1, 2024-W05 and 2024"
# Where year, month and day stand in each order, and how long each part may be.
ORDERS = {"dmy": (2, 1, 0), "mdy": (2, 0, 1), "ymd": (0, 1, 2)}
EXAMPLES = {"dmy": "31/01/2024", "mdy": "01/31/2024", "ymd": "2024/01/31"}


@dataclass(frozen=True, slots=True)
class Stamp:
    """The last day a date cell stands for, and how fine it is."""

    day: datetime.date
    precision: Interval


def read_stamp(text: str, order: str | None) -> Stamp:
    """One date cell; ValueError says why it is refused.

    A time of day is left out. An order of `dmy` or `mdy` allows that order alone, so that no cell can be read twice.

    >>> read_stamp("2024-02", None).day
    datetime.date(2024, 2, 29)
    """
    iso = ISO.fullmatch(text)
    if iso and order in (None, "ymd"):
        return _iso(iso)
    local = LOCAL.fullmatch(text)
    if order is None:
        if local:
            raise ValueError(f'may have day or month first; declare date_order = "dmy", "mdy" or "ymd", or {ALLOWED}')
        raise ValueError(f"is no date; {ALLOWED}")
    at = ORDERS[order]
    if local and len(local[at[0] + 1]) == 4 and len(local[at[1] + 1]) <= 2 and len(local[at[2] + 1]) <= 2:
        year, month, day = (int(local[part + 1]) for part in at)
        return Stamp(_date(year, month, day), "day")
    raise ValueError(f'is no date in the order declared; date_order = "{order}" allows {EXAMPLES[order]}')


def _iso(found: re.Match[str]) -> Stamp:
    year = int(found["year"])
    if found["quarter"]:
        return Stamp(_end(year * 4 + int(found["quarter"]) - 1, "quarter"), "quarter")
    if found["week"]:
        return Stamp(_sunday(year, int(found["week"])), "week")
    if found["day"]:
        return Stamp(_date(year, int(found["month"]), int(found["day"])), "day")
    if found["month"]:
        first = _date(year, int(found["month"]), 1)
        return Stamp(_end(year * 12 + first.month - 1, "month"), "month")
    return Stamp(datetime.date(year, 12, 31), "year")


def _date(year: int, month: int, day: int) -> datetime.date:
    try:
        return datetime.date(year, month, day)
    except ValueError as wrong:
        raise ValueError(f"does not exist ({wrong}); {ALLOWED}") from None


def _sunday(year: int, week: int) -> datetime.date:
    try:
        return datetime.date.fromisocalendar(year, week, 7)
    except ValueError:
        raise ValueError(f"does not exist (no week {week} in {year}); {ALLOWED}") from None


def _end(number: int, interval: Interval) -> datetime.date:
    day: datetime.date = last_day(np.array([number], dtype=np.int64), interval)[0].item()
    return day


def read_dates(source: Source, cells: pd.Series, interval: Interval, *, coarse: bool = False) -> tuple[Days, Ints]:
    """Last day and period number of every date cell; the index of `cells` is the row in the file.

    `coarse` allows dates coarser than the interval, which then stand at the last day of their period.
    """
    codes, texts = pd.factorize(cells.to_numpy(dtype=object))
    days = np.empty(len(texts), dtype="datetime64[D]")
    for at, text in enumerate(texts):
        try:
            stamp = read_stamp(text.strip(), source.date_order)
        except ValueError as refused:
            raise DataError(f"{_place(source, cells, codes, at)}: date {text!r} {refused}") from None
        if not coarse and INTERVALS.index(stamp.precision) > INTERVALS.index(interval):
            raise DataError(
                f"{_place(source, cells, codes, at)}: date {text!r} names a {stamp.precision}, too coarse for the "
                f"study's interval {interval!r}; give finer dates or a coarser interval"
            )
        days[at] = stamp.day
    return days[codes], ordinal(days, interval)[codes]


def _place(source: Source, cells: pd.Series, codes: Ints, at: int) -> str:
    return f"{source.file}: row {cells.index[int(np.argmax(codes == at))]}"


def bound(text: str | None, *, upper: bool) -> np.datetime64 | None:
    """The study's `from` as its first day, or `until` as its last day."""
    if text is None:
        return None
    stamp = read_stamp(text, None)
    last = np.datetime64(stamp.day, "D")
    if upper or stamp.precision == "day":
        return last
    first: np.datetime64 = last_day(ordinal(np.array([last]), stamp.precision) - 1, stamp.precision)[0] + 1
    return first
