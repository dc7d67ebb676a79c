"""Date cells: ISO 8601, or day and month in a declared order; anything else is refused with its row."""

from __future__ import annotations

import datetime
import re
from dataclasses import dataclass

import numpy as np
import pandas as pd

from carrylab.data.calendar import INTERVALS, Days, Ints, Interval, last_day, ordinal
from carrylab.errors import DataError
from carrylab.options import Source

ISO = re.compile(
    r"(?P<year>\d{4})(?:-Q(?P<quarter>[1-4])|-W(?P<week>\d{2})|-(?P<month>\d{2})(?:-(?P<day>\d{2}))?)?(?:[T ]00:00(?::00)?.*)?"
)
LOCAL = re.compile(r"(\d{1,2})[./-](\d{1,2})[./-](\d{4})")
ALLOWED = "allowed are 2024-01-31, 2024-01, 2024-Q1, 2024-W05 and 2024"
ORDERS = {"dmy": (2, 1, 0), "mdy": (2, 0, 1)}


@dataclass(frozen=True, slots=True)
class Stamp:
    """The last day a date cell stands for, and how fine it is."""

    day: datetime.date
    precision: str


def read_stamp(text: str, order: str | None) -> Stamp:
    """One date cell; ValueError says why it is refused."""
    found = ISO.fullmatch(text)
    if found and order in (None, "ymd"):
        return _iso(found)
    local = LOCAL.fullmatch(text)
    if local and order in ORDERS:
        parts = [int(local[1]), int(local[2]), int(local[3])]
        year, month, day = (parts[at] for at in ORDERS[order or ""])
        return Stamp(datetime.date(year, month, day), "day")
    if local and order is None:
        raise ValueError(f'could be day or month first; declare date_order = "dmy" or "mdy", or write ISO: {ALLOWED}')
    raise ValueError(f"is no date; {ALLOWED}")


def _iso(found: re.Match[str]) -> Stamp:
    year = int(found["year"])
    if found["quarter"]:
        return Stamp(_end(year * 4 + int(found["quarter"]) - 1, "quarter"), "quarter")
    if found["week"]:
        return Stamp(datetime.date.fromisocalendar(year, int(found["week"]), 7), "week")
    if found["day"]:
        return Stamp(datetime.date(year, int(found["month"]), int(found["day"])), "day")
    if found["month"]:
        return Stamp(_end(datetime.date(year, int(found["month"]), 1).month - 1 + year * 12, "month"), "month")
    return Stamp(datetime.date(year, 12, 31), "year")


def _end(number: int, interval: Interval) -> datetime.date:
    day: datetime.date = last_day(np.array([number], dtype=np.int64), interval)[0].item()
    return day


def read_dates(source: Source, cells: pd.Series, interval: Interval) -> tuple[Days, Ints]:
    """Last day and period number of every date cell; the index of `cells` is the row in the file."""
    texts, codes = np.unique(cells.to_numpy(dtype=str), return_inverse=True)
    days = np.empty(len(texts), dtype="datetime64[D]")
    for at, text in enumerate(texts):
        try:
            stamp = read_stamp(str(text).strip(), source.date_order)
        except ValueError as refused:
            raise DataError(f"{_at(source, cells, codes, at)}: date {str(text)!r} {_reason(refused)}") from None
        if INTERVALS.index(stamp.precision) > INTERVALS.index(interval):
            raise DataError(
                f"{_at(source, cells, codes, at)}: date {str(text)!r} names a {stamp.precision}, too coarse for the "
                f"study's {interval}s; give finer dates or a coarser interval"
            )
        days[at] = stamp.day
    return days[codes], ordinal(days, interval)[codes]


def _reason(refused: ValueError) -> str:
    said = str(refused)
    return said if said.startswith(("is ", "could")) else f"does not exist ({said}); {ALLOWED}"


def _at(source: Source, cells: pd.Series, codes: Ints, at: int) -> str:
    row = cells.index[int(np.flatnonzero(codes == at)[0])]
    return f"{source.file}: row {row}"


def bound(text: str | None, interval: Interval, *, upper: bool) -> int | None:
    """Period number of the study's `from` (its first day) or `until` (its last day)."""
    if text is None:
        return None
    stamp = read_stamp(text, None)
    day = np.array([stamp.day], dtype="datetime64[D]")
    if not upper and stamp.precision != "day":
        first = ordinal(day, stamp.precision)  # type: ignore[arg-type]
        day = last_day(first - 1, stamp.precision) + np.timedelta64(1, "D")  # type: ignore[arg-type]
    return int(ordinal(day, interval)[0])
