"""Units, compounding and day counts: every rate becomes continuously compounded, per year, as a decimal."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

import numpy as np

from carrylab.data.calendar import Days, Floats
from carrylab.options import Compounding, DayCount, Unit

UNITS: Mapping[str, float] = MappingProxyType({"percent": 1e-2, "decimal": 1.0, "basis points": 1e-4})
TIMES_A_YEAR: Mapping[str, int] = MappingProxyType({"annual": 1, "semi-annual": 2, "quarterly": 4, "monthly": 12})


def to_decimal(values: Floats, unit: Unit) -> Floats:
    """Values in percent or basis points as decimals."""
    return values * UNITS[unit]


def log_rate(rate: Floats, tau: Floats | float, years: Floats | float, compounding: Compounding) -> Floats:
    """Continuously compounded rate per year such that years x result is the log growth over the whole time.

    annual and m times a year: m ln(1 + R/m). simple: ln(1 + R tau) / years. discount: -ln(1 - d tau) / years.
    discount factor: -ln(P) / years. `tau` is the accrual fraction of the market's day count, `years` the time on
    the study's own axis; they are two different fractions. NaN outside the domain (a growth factor not above zero).
    """
    if compounding == "continuous":
        return rate
    with np.errstate(invalid="ignore", divide="ignore"):
        if compounding in TIMES_A_YEAR:
            m = TIMES_A_YEAR[compounding]
            return m * _log(1.0 + rate / m)
        if compounding == "simple":
            return _log(1.0 + rate * tau) / years
        price = rate if compounding == "discount factor" else 1.0 - rate * tau
        return -_log(price) / years


def _log(growth: Floats) -> Floats:
    """ln, with NaN where a growth factor or a price is not above zero."""
    return np.log(np.where(growth > 0, growth, np.nan))


def accrual(start: Days, end: Days, day_count: DayCount) -> Floats:
    """Accrual fraction from `start` to `end` (2006 ISDA Definitions, section 4.16)."""
    return DAY_COUNTS[day_count](start.astype("datetime64[D]"), end.astype("datetime64[D]"))


def _actual(basis: float) -> Callable[[Days, Days], Floats]:
    return lambda start, end: (end - start).astype(np.float64) / basis


def _parts(days: Days) -> tuple[Floats, Floats, Floats]:
    months = days.astype("datetime64[M]")
    number = months.astype(np.int64)
    day = (days - months.astype("datetime64[D]")).astype(np.int64) + 1
    return (number // 12).astype(np.float64), (number % 12).astype(np.float64), day.astype(np.float64)


def _thirty(*, european: bool) -> Callable[[Days, Days], Floats]:
    def fraction(start: Days, end: Days) -> Floats:
        (y1, m1, d1), (y2, m2, d2) = _parts(start), _parts(end)
        d1 = np.minimum(d1, 30)
        d2 = np.where((d2 == 31) & (european | (d1 == 30)), 30, d2)
        return (360 * (y2 - y1) + 30 * (m2 - m1) + (d2 - d1)) / 360

    return fraction


def _act_act(start: Days, end: Days) -> Floats:
    """Days in leap years over 366 plus the other days over 365."""
    return _leap_time(end) - _leap_time(start)


def _leap_time(days: Days) -> Floats:
    year = days.astype("datetime64[Y]")
    length = ((year + 1).astype("datetime64[D]") - year.astype("datetime64[D]")).astype(np.float64)
    elapsed: Floats = (days - year.astype("datetime64[D]")).astype(np.float64)
    time: Floats = year.astype(np.float64) + elapsed / length
    return time


DAY_COUNTS: Mapping[str, Callable[[Days, Days], Floats]] = MappingProxyType(
    {
        "act/360": _actual(360.0),
        "act/365f": _actual(365.0),
        "30/360": _thirty(european=False),
        "30e/360": _thirty(european=True),
        "act/act": _act_act,
    }
)
