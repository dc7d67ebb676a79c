"""Rates of a wanted length from those quoted, by the declared rule and never silently."""

from __future__ import annotations

import numpy as np

from carrylab.data.calendar import Calendar, Floats, Tenor, horizon_years, steps_in
from carrylab.data.files import shown
from carrylab.data.panel import Curves
from carrylab.errors import DataError
from carrylab.options import Market

SAME = 1e-9  # years
NOT_QUOTED = "{wanted} are not quoted"
STEP_TENORS = {"month": Tenor(months=1), "quarter": Tenor(months=3), "year": Tenor(months=12), "week": Tenor(days=7)}


def step_tenor(calendar: Calendar) -> Tenor | None:
    """The length of one period, or None on the day calendar, where no such rate is quoted."""
    return STEP_TENORS.get(calendar.interval)


def same_length(quoted: Curves, years: float) -> Tenor | None:
    """The quoted length of so many years, or None."""
    return next((tenor for tenor in quoted.tenors if abs(tenor.years - years) < SAME), None)


def rates_at(quoted: Curves, wanted: Tenor, market: Market, role: str) -> tuple[Floats, tuple[str, ...]]:
    """Rates or log prices of one length (T, N), and notes of the rules that were used, each on the code's own quotes.

    exact: only the quoted length. linear in rate: between the two quoted lengths around it, never beyond them.
    nearest: the closest quoted length stands in. A code without that length is a hole and noted; DataError where all
    are. On the day interval a length in days is trading days, so 21d are quotes of 1m.
    """
    found = np.full(quoted.values.shape[:2], np.nan)
    used: dict[str, list[str]] = {}
    for own in quoted.alike():
        rates, rule = _by_rule(own, wanted, market)
        used.setdefault(rule, []).extend(own.codes)
        if rates is not None:
            found[:, [quoted.codes.index(code) for code in own.codes]] = rates
    if list(used) == [NOT_QUOTED]:
        raise DataError(_missing(quoted, wanted, market, role))
    notes = []
    for rule, codes in used.items():
        whose = "" if len(codes) == len(quoted.codes) else f" ({shown(codes)})"
        notes += [f"{role} of {rule.format(wanted=wanted)}{whose}"] if rule else []
    return found, tuple(notes)


def _by_rule(own: Curves, wanted: Tenor, market: Market) -> tuple[Floats | None, str]:
    """Rates of codes that quote the same lengths, None where the rule gives none, and the rule in words."""
    years, wanted_years = own.years, horizon_years(wanted, market.interval)
    same = same_length(own, wanted_years)
    if same is not None:
        return own.values[:, :, own.tenors.index(same)], ""
    if market.missing_tenor == "nearest" and own.tenors:
        at = int(np.argmin(np.abs(years - wanted_years)))
        return own.values[:, :, at], f"{own.tenors[at]} stand in for {{wanted}}"
    if market.missing_tenor == "linear in rate" and own.tenors and years[0] < wanted_years < years[-1]:
        above = int(np.searchsorted(years, wanted_years))
        share = (wanted_years - years[above - 1]) / (years[above] - years[above - 1])
        low, high = own.values[:, :, above - 1], own.values[:, :, above]
        return (1 - share) * low + share * high, "{wanted} are linear in the rate between quoted lengths"
    return None, NOT_QUOTED


def _missing(quoted: Curves, wanted: Tenor, market: Market, role: str) -> str:
    known = ", ".join(str(tenor) for tenor in quoted.tenors)
    return (
        f"market {market.name!r}: no {role} of {wanted}{_trading(wanted, market)}; quoted are {known}, missing_tenor "
        f'is {market.missing_tenor!r}; quote that length, or set missing_tenor to "linear in rate", which fills '
        'between the quoted lengths only, or to "nearest"'
    )


def _trading(wanted: Tenor, market: Market) -> str:
    return " (trading days)" if market.interval == "day" and steps_in(wanted, "day") is not None else ""
