"""Rates of a wanted length from those quoted, by the declared rule and never silently."""

from __future__ import annotations

import numpy as np

from carrylab.data.calendar import Calendar, Floats, Tenor
from carrylab.data.panel import Curves
from carrylab.errors import DataError
from carrylab.options import Market

STEP_TENORS = {"month": Tenor(months=1), "quarter": Tenor(months=3), "year": Tenor(months=12), "week": Tenor(days=7)}


def step_tenor(calendar: Calendar) -> Tenor | None:
    """The length of one period, or None on the day calendar, where no such rate is quoted."""
    return STEP_TENORS.get(calendar.interval)


def same_length(quoted: Curves, wanted: Tenor) -> Tenor | None:
    """The quoted length that equals the wanted one, or None."""
    return next((tenor for tenor in quoted.tenors if abs(tenor.years - wanted.years) < 1e-9), None)


def rates_at(quoted: Curves, wanted: Tenor, market: Market, role: str) -> tuple[Floats, tuple[str, ...]]:
    """Rates or log prices of one length (T, N), and the note of the rule that was used.

    exact: only the quoted length. linear in rate: between the two quoted lengths around it, never beyond them.
    nearest: the closest quoted length stands in. Raises DataError where the rule finds none.
    """
    same = same_length(quoted, wanted)
    if same is not None:
        return quoted.values[:, :, quoted.tenors.index(same)], ()
    if market.missing_tenor == "nearest":
        at = int(np.argmin(np.abs(quoted.years - wanted.years)))
        return quoted.values[:, :, at], (f"{role} of {quoted.tenors[at]} stand in for {wanted}",)
    years = quoted.years
    if market.missing_tenor == "linear in rate" and years[0] < wanted.years < years[-1]:
        above = int(np.searchsorted(years, wanted.years))
        share = (wanted.years - years[above - 1]) / (years[above] - years[above - 1])
        low, high = quoted.values[:, :, above - 1], quoted.values[:, :, above]
        return (1 - share) * low + share * high, (f"{role} of {wanted} are linear in the rate between quoted lengths",)
    known = ", ".join(str(tenor) for tenor in quoted.tenors)
    raise DataError(
        f"market {market.name!r}: no {role} of {wanted}; quoted are {known}, missing_tenor is {market.missing_tenor!r}; "
        'quote that length, or set missing_tenor to "linear in rate" or "nearest"'
    )

