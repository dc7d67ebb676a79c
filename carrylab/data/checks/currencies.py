"""Checks on quotes of currencies: two-way quotes, the size of forward premia, and pegs."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

import numpy as np

from carrylab.data.calendar import Floats
from carrylab.data.checks.finding import Bools, Check, Dense, Level, find_series, runs
from carrylab.data.checks.limits import LARGE_PREMIUM, PEG_DIFFERENTIAL, PEG_SD, WIDE, YEAR
from carrylab.data.panel import Panel, curves
from carrylab.data.quotes import forward_quotes, spot_quotes
from carrylab.data.read import MarketData
from carrylab.errors import DataError

LEAST_WINDOW = 12  # periods for a standard deviation


def two_way(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """P3: a bid above its ask, or a spread far wider than usual; points may run the other way round."""
    for one in tables:
        if not one.is_price():
            continue
        for at, spread in enumerate(np.nan_to_num(one.spread).T):
            crossed = runs(spread < 0)
            if crossed:
                seen = f"bid above ask{_more(crossed)}"
                yield one.found(("P3", "error"), at, crossed[0], (seen, "exchange the two, or drop the quote"))
            usual = float(np.median(spread[spread != 0])) if spread.any() else 0.0
            wide = runs(spread > WIDE * usual) if usual > 0 else []
            if wide:
                widest = max(wide, key=lambda run: float(spread[run].max()))
                seen = f"spread {spread[widest].max() / usual:.0f} times its median{_more(wide)}"
                yield one.found(("P3", "warning"), at, widest, (seen, "check the quote"))


def _more(found: Sequence[slice]) -> str:
    return f", and {len(found) - 1} times more" if len(found) > 1 else ""


def points(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """P4: forward premia above 100% a year: the scale of the points, or points taken for outright prices."""
    large = _large_premia(data)
    for one in tables:
        own = [at for at, label in enumerate(one.labels) if any(code in label for code in large)]
        if one.role != "forwards" or not own:
            continue
        level: tuple[str, Level] = ("P4", "error")
        seen = f"median forward premium above {LARGE_PREMIUM:.0%} a year in {len(own)} of {len(one.labels)} series"
        advice = "check scale, and whether these are points or outright prices"
        if 2 * len(own) >= len(one.labels):
            yield one.whole(level, (seen, advice))
        else:
            yield from (one.found(level, at, one.span(at), (seen, advice)) for at in own)


def _large_premia(data: MarketData) -> set[str]:
    """Currencies whose usual forward premium is too large; none where forwards cannot be built, which is said later."""
    if data.market.kind != "currencies" or "forwards" not in data.tables:
        return set()
    home = str(data.market.home)
    try:
        spot = spot_quotes(data.tables["spot"], data.calendar, home).home
        forwards = forward_quotes(data.tables["forwards"], data.tables["spot"], data.calendar, home)
    except DataError:
        return set()
    premia = np.abs(spot.pick(forwards.codes)[:, :, None] - forwards.values) / forwards.years
    return {
        code
        for n, code in enumerate(forwards.codes)
        for premium in premia[:, n].T
        if code not in data.market.offshore
        and np.isfinite(premium).any()
        and float(np.nanmedian(premium)) > LARGE_PREMIUM
    }


def pegs(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """S2: spot rates that hardly move while rates differ: an untroubled peg says nothing about its break."""
    if data.market.kind != "currencies" or "deposits" not in data.tables:
        return
    home = str(data.market.home)
    try:
        rates = curves(data.tables["deposits"], data.calendar, "currency", "tenor")
    except DataError:
        return
    spot, first = spot_quotes(data.tables["spot"], data.calendar, home).home, Panel(rates.codes, rates.values[:, :, 0])
    periods = YEAR[data.calendar.interval]
    for code in spot.codes:
        calm = _calm(np.diff(spot.column(code), prepend=np.nan), periods)
        gap = np.abs(first.column(code) - first.column(home))[calm]
        place = find_series(tables, "spot", (code, home))
        if place is not None and (np.nan_to_num(gap) > PEG_DIFFERENTIAL).any():
            dense, at = place
            run = max(runs(calm), key=lambda rows: rows.stop - rows.start)
            seen = f"changes have a yearly sd below {PEG_SD:.0%} while rates differ by more than {PEG_DIFFERENTIAL:.0%}"
            advice = "a peg: no break in sample says nothing about one; look before and after"
            advice += "" if code in data.market.pegs else ", declare it under pegs"
            yield dense.found(("S2", "note"), at, run, (seen, advice))


def _calm(changes: Floats, periods: int) -> Bools:
    """Periods inside a window of a year whose changes hardly vary."""
    width, calm = max(periods, LEAST_WINDOW), np.zeros(len(changes), dtype=np.bool_)
    if len(changes) > width:
        sd = np.lib.stride_tricks.sliding_window_view(changes, width).std(axis=1)
        for start in np.flatnonzero(sd < PEG_SD / math.sqrt(periods)):
            calm[start : start + width] = True
    return calm


CURRENCIES = {"P3": two_way, "P4": points, "S2": pegs}
