"""Rates of a wanted length from those quoted, by the declared rule and never silently."""

from __future__ import annotations

import numpy as np

from carrylab.data.calendar import Calendar, Floats, Tenor, horizon_years, steps_in
from carrylab.data.panel import Curves
from carrylab.errors import DataError
from carrylab.options import Market

SAME = 1e-9  # years
STEP_TENORS = {"month": Tenor(months=1), "quarter": Tenor(months=3), "year": Tenor(months=12), "week": Tenor(days=7)}


def step_tenor(calendar: Calendar) -> Tenor | None:
    """The length of one period, or None on the day calendar, where no such rate is quoted."""
    return STEP_TENORS.get(calendar.interval)


def same_length(quoted: Curves, years: float) -> Tenor | None:
    """The quoted length of so many years, or None."""
    return next((tenor for tenor in quoted.tenors if abs(tenor.years - years) < SAME), None)


def rates_at(quoted: Curves, wanted: Tenor, market: Market, role: str) -> tuple[Floats, tuple[str, ...]]:
    """Rates or log prices of one length (T, N), and the note of the rule that was used.

    exact: only the quoted length. linear in rate: between the two quoted lengths around it, never beyond them.
    nearest: the closest quoted length stands in. Raises DataError where the rule finds none. On the day interval a
    length in days is trading days, so 21d are quotes of 1m.
    """
    wanted_years = horizon_years(wanted, market.interval)
    same = same_length(quoted, wanted_years)
    if same is not None:
        return quoted.values[:, :, quoted.tenors.index(same)], ()
    if market.missing_tenor == "nearest":
        at = int(np.argmin(np.abs(quoted.years - wanted_years)))
        return quoted.values[:, :, at], (f"{role} of {quoted.tenors[at]} stand in for {wanted}",)
    years = quoted.years
    if market.missing_tenor == "linear in rate" and years[0] < wanted_years < years[-1]:
        above = int(np.searchsorted(years, wanted_years))
        share = (wanted_years - years[above - 1]) / (years[above] - years[above - 1])
        low, high = quoted.values[:, :, above - 1], quoted.values[:, :, above]
        return (1 - share) * low + share * high, (f"{role} of {wanted} are linear in the rate between quoted lengths",)
    known = ", ".join(str(tenor) for tenor in quoted.tenors)
    raise DataError(
        f"market {market.name!r}: no {role} of {wanted}{_trading(wanted, market)}; quoted are {known}, missing_tenor "
        f'is {market.missing_tenor!r}; quote that length, or set missing_tenor to "linear in rate", which fills '
        'between the quoted lengths only, or to "nearest"'
    )


def _trading(wanted: Tenor, market: Market) -> str:
    return " (trading days)" if market.interval == "day" and steps_in(wanted, "day") is not None else ""
