"""Checks on currencies: covered parity, triangles, two-way quotes, points, pegs."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from carrylab.data.calendar import Floats, Tenor
from carrylab.data.checks.finding import Check, Dense, Level, runs
from carrylab.data.panel import Curves, Panel, curves
from carrylab.data.quotes import forward_quotes, split_pair, spot_quotes
from carrylab.data.read import MarketData
from carrylab.errors import DataError

SLOPE_BAND = (0.85, 1.15)  # covered parity slopes outside are an error
LEAST_R2 = 0.8  # and so is a fit below this
ENOUGH = 24  # periods for a parity slope
LARGE_PREMIUM = 1.0  # |ln F/S| a year
TRIANGLE_BAND = 0.001  # ten basis points on top of half spreads
WIDE = 10.0  # times the median spread
PEG_SD, PEG_DIFFERENTIAL = 0.003, 0.01  # monthly sd of changes, differential a year
PEG_PERIODS = 12
SIGNATURES = (
    (-1.0, "both quotes turned round, or the two rates swapped"),
    (0.01, "rates in percent taken for decimals"),
    (0.0001, "rates in basis points taken for decimals"),
    (0.25, "quarterly rates not annualised"),
    (0.083, "monthly rates not annualised"),
    (3.0, "forwards of three times the declared length"),
    (12.0, "forwards of twelve times the declared length"),
    (1.0, "stale or averaged spot rates, or a rate of another length"),
)


@dataclass(frozen=True, slots=True)
class Covered:
    """Covered parity of one currency and length: slope of the forward discount on the differential, R2, median size.

    `own` is the coefficient of the currency's own rate when the two rates may enter differently.
    """

    currency: str
    tenor: Tenor
    slope: float
    r2: float
    size: float
    own: float

    def holds(self) -> bool:
        """Slope and fit inside their bands."""
        return SLOPE_BAND[0] < self.slope < SLOPE_BAND[1] and self.r2 > LEAST_R2

    def signature(self) -> str:
        """The mistake whose slope is closest."""
        sign = math.copysign(1.0, self.slope)
        if abs(self.own - 1.0) > 0.5 and abs(self.slope - 1.0) < 0.5:
            return f"its own rate enters with {self.own:.2g} where 1 is right: 12 is a rate a month, 4 a quarter"
        if abs(self.slope - 1.0) < 0.5:
            return SIGNATURES[-1][1]
        same = [(value, words) for value, words in SIGNATURES if math.copysign(1.0, value) == sign]
        return min(same, key=lambda one: abs(math.log(abs(one[0]) / max(abs(self.slope), 1e-9))))[1]


def parity_slope(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """P1: regress (s - f) a year on i* - i in log rates, for each currency and length; all three numbers are judged.

    Forwards of a currency declared offshore imply another rate than the deposits, so theirs is only a warning.
    """
    offshore = set(data.market.offshore)
    everything = covered(data)
    yield from _failures(tables, [one for one in everything if one.currency in offshore and not one.holds()], "warning")
    found = [one for one in everything if one.currency not in offshore]
    wrong = [one for one in found if not one.holds()]
    currencies = {one.currency for one in found}
    everywhere = len(currencies) > 1 and {one.currency for one in wrong} == currencies
    if everywhere:
        worst = min(wrong, key=lambda one: one.r2)
        dense = _file_of(tables, "spot" if worst.slope < 0 else "deposits")
        if dense is not None:
            yield dense.whole(("P1", "error"), _said(worst, f"in all {len(currencies)} currencies: "))
        return
    yield from _failures(tables, wrong, "error")


def _failures(tables: Sequence[Dense], wrong: Sequence[Covered], level: Level) -> Iterator[Check]:
    for one in wrong:
        forwards = one.slope > 1.5
        dense = _file_of(tables, "forwards" if forwards else "deposits", one.currency)
        if dense is not None:
            at = _series_of(dense, one)
            finding = dense.found(("P1", level), at, _span(dense, at), _said(one, ""))
            yield replace(finding, series=dense.codes[at])


def _said(one: Covered, where: str) -> tuple[str, str]:
    numbers = f"slope {one.slope:.3g}, R2 {one.r2:.2f}, median size {one.size:.2%} a year, at {one.tenor}"
    return f"{where}forward discount on rate differential: {numbers}", f"looks like {one.signature()}"


def _file_of(tables: Sequence[Dense], role: str, currency: str = "") -> Dense | None:
    return next((one for one in tables if one.role == role and any(currency in label for label in one.labels)), None)


def _series_of(dense: Dense, one: Covered) -> int:
    own = [at for at, label in enumerate(dense.labels) if one.currency in label]
    exact = [at for at in own if dense.labels[at].endswith(one.tenor.canonical)]
    return (exact or own)[0]


def _span(dense: Dense, at: int) -> slice:
    here = np.flatnonzero(np.isfinite(dense.values[:, at]))
    return slice(int(here[0]), int(here[-1]) + 1)


def covered(data: MarketData) -> list[Covered]:
    """Covered parity of every currency and length that has both a forward and deposits."""
    world = _world(data)
    if world is None:
        return []
    spot, forwards, rates = world
    home = str(data.market.home)
    found = []
    for tenor in forwards.tenors:
        deposits, outright = rates.at(tenor), forwards.at(tenor)
        if deposits is None or outright is None or home not in deposits.codes:
            continue
        for code in outright.codes:
            discount = (spot.column(code) - outright.column(code)) / tenor.years
            differential = deposits.column(code) - deposits.column(home)
            both = np.isfinite(discount) & np.isfinite(differential)
            if both.sum() >= ENOUGH and differential[both].std() > 0:
                rates_of = np.stack([deposits.column(code)[both], deposits.column(home)[both]], axis=1)
                found.append(_fit((code, tenor), discount[both], differential[both], rates_of))
    return found


def _fit(what: tuple[str, Tenor], discount: Floats, differential: Floats, rates: Floats) -> Covered:
    own = float(np.linalg.lstsq(rates - rates.mean(axis=0), discount - discount.mean(), rcond=None)[0][0])
    x, y = differential - differential.mean(), discount - discount.mean()
    slope = float(x @ y / (x @ x))
    r2 = float((x @ y) ** 2 / ((x @ x) * (y @ y))) if y @ y > 0 else 0.0
    return Covered(*what, slope, r2, float(np.median(np.abs(discount))), own)


def _world(data: MarketData) -> tuple[Panel, Curves, Curves] | None:
    """Log spot, log forwards and log rates; None where one is absent or cannot be built."""
    if data.market.kind != "currencies" or not all(role in data.tables for role in ("spot", "forwards", "deposits")):
        return None
    home = str(data.market.home)
    try:
        spot = spot_quotes(data.tables["spot"], data.calendar, home).home
        forwards = forward_quotes(data.tables["forwards"], data.tables["spot"], data.calendar, home)
        return spot, forwards, curves(data.tables["deposits"], data.calendar, "currency", "tenor")
    except DataError:
        return None


def triangle(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """P2: a cross rate against the two rates with home; about twice the cross means it is turned round."""
    if data.market.home is None or "spot" not in data.tables:
        return
    quotes = spot_quotes(data.tables["spot"], data.calendar, data.market.home)
    for one in tables:
        if one.role != "spot" or one.table.source.quote != "pair":
            continue
        for at, label in enumerate(one.labels):
            base, quote = split_pair(one.table.source, label)
            if data.market.home in (base, quote):
                continue
            cross = np.log(one.values[:, at])
            gap = cross - (quotes.home.column(base) - quotes.home.column(quote))
            band = TRIANGLE_BAND + np.nan_to_num(one.spread[:, at] / one.values[:, at])
            open_runs = runs(np.nan_to_num(np.abs(gap)) > band)
            if open_runs:
                rows = slice(open_runs[0].start, open_runs[-1].stop)
                seen = f"the triangle with {data.market.home} is open by up to {np.nanmax(np.abs(gap)):.1%}"
                inside = gap[rows]
                turned = np.nanmedian(np.abs(inside - 2 * cross[rows])) < np.nanmedian(np.abs(inside)) / 10
                advice = f"{label} looks turned round" if turned else "check which of the three rates is wrong"
                yield one.found(("P2", "error"), at, rows, (seen, advice))


def two_way(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """P3: a bid above its ask, or a spread far wider than usual; points may run the other way round."""
    for one in tables:
        if not one.is_price():
            continue
        for at, spread in enumerate(one.spread.T):
            for run in runs(np.nan_to_num(spread) < 0):
                yield one.found(("P3", "error"), at, run, ("bid above ask", "exchange the two, or drop the quote"))
            usual = np.nanmedian(spread) if np.isfinite(spread).any() else 0.0
            for run in runs(np.nan_to_num(spread) > WIDE * usual) if usual > 0 else []:
                seen = f"spread {np.nanmax(spread[run]) / usual:.0f} times its median"
                yield one.found(("P3", "warning"), at, run, (seen, "check the quote"))


def points(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """P4: forward premia above 100% a year: the scale of the points, or points taken for outright prices."""
    if data.market.kind != "currencies" or "forwards" not in data.tables:
        return
    home = str(data.market.home)
    try:
        spot = spot_quotes(data.tables["spot"], data.calendar, home).home
        forwards = forward_quotes(data.tables["forwards"], data.tables["spot"], data.calendar, home)
    except DataError:
        return
    premia = np.abs(spot.pick(forwards.codes)[:, :, None] - forwards.values) / forwards.years
    large = [
        (code, tenor)
        for n, code in enumerate(forwards.codes)
        for m, tenor in enumerate(forwards.tenors)
        if code not in data.market.offshore
        and np.isfinite(premia[:, n, m]).any()
        and np.nanmedian(premia[:, n, m]) > LARGE_PREMIUM
    ]
    advice = "check scale, and whether these are points or outright prices"
    for one in tables:
        if one.role != "forwards" or not large:
            continue
        own = [at for at, label in enumerate(one.labels) if any(code in label for code, _ in large)]
        seen = f"median forward premium above {LARGE_PREMIUM:.0%} a year in {len(own)} of {len(one.labels)} series"
        level: tuple[str, Level] = ("P4", "error")
        if 2 * len(own) >= len(one.labels):
            yield one.whole(level, (seen, advice))
        else:
            yield from (one.found(level, at, None, (seen, advice)) for at in own)


def pegs(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """S2: spot rates that hardly move while rates differ: an untroubled peg says nothing about its break."""
    if data.market.kind != "currencies" or data.market.home is None:
        return
    quotes = spot_quotes(data.tables["spot"], data.calendar, data.market.home).home
    for at, code in enumerate(quotes.codes):
        changes = np.concatenate([[np.nan], np.diff(quotes.values[:, at])])
        calm = _calm(changes)
        if not calm.any() or not _differs(data, code, calm):
            continue
        run = max(runs(calm), key=lambda rows: rows.stop - rows.start)
        dense = _file_of(tables, "spot", code)
        if dense is not None:
            seen = (
                f"changes have a monthly sd below {PEG_SD:.1%} while rates differ by more than {PEG_DIFFERENTIAL:.0%}"
            )
            advice = "a peg: no break in sample says nothing about one; look before and after, declare it under pegs"
            label = next(i for i, name in enumerate(dense.labels) if code in name)
            yield dense.found(("S2", "note"), label, run, (seen, advice))


def _calm(changes: Floats) -> np.typing.NDArray[np.bool_]:
    """Periods inside a window of twelve whose changes hardly vary."""
    calm = np.zeros(len(changes), dtype=np.bool_)
    if len(changes) <= PEG_PERIODS:
        return calm
    windows = np.lib.stride_tricks.sliding_window_view(changes, PEG_PERIODS)
    sd = windows.std(axis=1)
    for start in np.flatnonzero(sd < PEG_SD):
        calm[start : start + PEG_PERIODS] = True
    return calm


def _differs(data: MarketData, code: str, calm: np.typing.NDArray[np.bool_]) -> bool:
    if "deposits" not in data.tables:
        return False
    try:
        rates = curves(data.tables["deposits"], data.calendar, "currency", "tenor")
    except DataError:
        return False
    first = Panel(rates.codes, rates.values[:, :, 0])
    gap = np.abs(first.column(code) - first.column(str(data.market.home)))
    return bool((np.nan_to_num(gap[calm]) > PEG_DIFFERENTIAL).any())


CURRENCIES = {"P1": parity_slope, "P2": triangle, "P3": two_way, "P4": points, "S2": pegs}
