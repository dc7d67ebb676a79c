"""Covered parity as a check: what the forward discount says of units, directions and lengths (P1)."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from carrylab.data.calendar import Floats, Tenor
from carrylab.data.checks.finding import Check, Dense, Level, find_series
from carrylab.data.checks.limits import (
    CLOSE_BAND,
    CLOSE_R2,
    ENOUGH,
    LARGE_PREMIUM,
    LEAST_R2,
    SLOPE_BAND,
    SMALL_MISFIT,
    TINY_MISFIT,
)
from carrylab.data.panel import Curves, Panel, curves
from carrylab.data.quotes import forward_quotes, spot_quotes
from carrylab.data.read import MarketData
from carrylab.errors import DataError

# The slope each mistake leaves, and the data it is looked for in.
SIGNATURES = (
    (-1.0, "deposits", "both quotes turned round, or the two rates swapped"),
    (0.01, "deposits", "rates in percent taken for decimals"),
    (0.0001, "deposits", "rates in basis points taken for decimals"),
    (100.0, "deposits", "rates in decimals taken for percent"),
    (4.0, "deposits", "rates a quarter taken for rates a year"),
    (12.0, "deposits", "rates a month taken for rates a year, or forwards of twelve times the declared length"),
    (3.0, "forwards", "forwards of three times the declared length"),
    (0.25, "forwards", "forwards of a quarter of the declared length"),
    (1.0 / 12.0, "forwards", "forwards of a twelfth of the declared length"),
)
LARGE = ("forwards", "points with another scale or taken for prices, or only one of spot and forward turned round")
LOOSE = ("spot", "spot rates of another day than the forwards: stale, or averages")
LENGTH = ("deposits", "rates of another length or day than the forwards, or a basis")


@dataclass(frozen=True, slots=True)
class Covered:
    """Covered parity of one currency and length: the forward discount regressed on the differential.

    `misfit` is the residuals' standard deviation and `size` the discount's median size, both a year; `error` is the
    slope's standard error. `own` and `home` are the slopes on the two rates when they may differ, with their `free_r2`.
    """

    currency: str
    tenor: Tenor
    slope: float
    r2: float
    size: float
    misfit: float
    error: float
    own: float
    home: float
    free_r2: float

    def level(self) -> Level | None:
        """How wrong it is: slope and fit are judged together, so that a basis on a small differential is no error."""
        steep, loose = self._outside(SLOPE_BAND), self.r2 < LEAST_R2
        if self.free_r2 > CLOSE_R2 and max(abs(self.own - 1.0), abs(self.home + 1.0)) > 0.5:
            return "error"
        if loose and self.misfit < SMALL_MISFIT and self.size < LARGE_PREMIUM:
            return "warning" if self.misfit > TINY_MISFIT else None
        if steep or loose:
            return "error"
        close = not self._outside(CLOSE_BAND) and self.r2 > CLOSE_R2
        return None if close or self.misfit < TINY_MISFIT else "warning"

    def signature(self) -> tuple[str, str]:
        """Where to look, and for which mistake: the one whose slope, fit and size are closest."""
        if self.size > LARGE_PREMIUM:
            return LARGE
        apart = self.free_r2 > CLOSE_R2
        for whose, factor, other in (("its own", self.own, -self.home), ("the home", -self.home, self.own)):
            if apart and abs(factor - 1.0) > 0.5 and abs(other - 1.0) < 0.5:
                hint = "12 is a rate a month, 4 a quarter"
                return "deposits", f"{whose} rate enters with {factor:.2g} where 1 is right: {hint}"
        if self.r2 < 0.5:
            return LOOSE
        if abs(self.slope - 1.0) < 0.5:
            return LENGTH
        _, role, words = min((one for one in SIGNATURES if one[0] * self.slope > 0), key=self._distance)
        return role, words

    def _distance(self, signature: tuple[float, str, str]) -> float:
        return abs(math.log(signature[0] / self.slope))

    def _outside(self, band: tuple[float, float]) -> bool:
        return not band[0] < self.slope < band[1] and abs(self.slope - 1.0) > 3.0 * self.error


def parity_slope(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """P1: regress (s - f) a year on i* - i in log rates, for each currency and length; all three numbers are judged.

    Forwards of a currency declared offshore imply another rate than the deposits, so theirs is only a warning.
    """
    offshore = set(data.market.offshore)
    found = covered(data)
    onshore = {one.currency for one in found} - offshore
    wrong = [one for one in found if one.level() == "error" and one.currency in onshore]
    if len(onshore) > 1 and {one.currency for one in wrong} == onshore:
        worst = min(wrong, key=lambda one: one.r2)
        role = "spot" if worst.slope < 0 and worst.r2 > LEAST_R2 else worst.signature()[0]
        dense = next(one for one in tables if one.role == role)
        yield dense.whole(("P1", "error"), _said(worst, f"in all {len(onshore)} currencies: ", [worst]))
        found = [one for one in found if one not in wrong]
    for code in dict.fromkeys(one.currency for one in found):
        own = [one for one in found if one.currency == code and one.level()]
        if own:
            yield from _failure(tables, own, code in offshore, str(data.market.home))


def _failure(tables: Sequence[Dense], own: Sequence[Covered], offshore: bool, home: str) -> Iterator[Check]:
    """One line a currency, on the worst of its lengths."""
    worst = min(own, key=lambda one: (one.level() != "error", one.r2))
    level: Level = "error" if worst.level() == "error" and not offshore else "warning"
    place = find_series(tables, worst.signature()[0], (worst.currency, home), worst.tenor.canonical)
    if place is not None:
        dense, at = place
        finding = dense.found(("P1", level), at, dense.span(at), _said(worst, "", own))
        yield replace(finding, series=dense.codes[at])


def _said(worst: Covered, where: str, own: Sequence[Covered]) -> tuple[str, str]:
    numbers = f"slope {worst.slope:.3g}, R2 {worst.r2:.2f}, median size {worst.size:.2%} a year, at {worst.tenor}"
    others = [str(one.tenor) for one in own if one is not worst]
    numbers += f" (also at {', '.join(others)})" if others else ""
    return f"{where}forward discount on rate differential: {numbers}", f"looks like {worst.signature()[1]}"


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
            both = np.isfinite(discount) & np.isfinite(deposits.pick([code, home])).all(axis=1)
            own, base = deposits.column(code)[both], deposits.column(home)[both]
            if both.sum() >= ENOUGH and (own - base).std() > 0:
                found.append(fit_covered((code, tenor), discount[both], (own, base)))
    return found


def _world(data: MarketData) -> tuple[Panel, Curves, Curves] | None:
    """Log spot, log forwards and log rates; None where one is absent or cannot be built, which the market will say."""
    if data.market.kind != "currencies" or not all(role in data.tables for role in ("spot", "forwards", "deposits")):
        return None
    home = str(data.market.home)
    try:
        spot = spot_quotes(data.tables["spot"], data.calendar, home).home
        forwards = forward_quotes(data.tables["forwards"], data.tables["spot"], data.calendar, home)
        return spot, forwards, curves(data.tables["deposits"], data.calendar, "currency", "tenor")
    except DataError:
        return None


def fit_covered(what: tuple[str, Tenor], discount: Floats, rates: tuple[Floats, Floats]) -> Covered:
    """Regress the discount (T,) on own rate less home rate, and on both rates (T,) freely; all logs a year."""
    y, own, home = (series - series.mean() for series in (discount, *rates))
    x = own - home
    slope = float(x @ y / (x @ x))
    residual = y - slope * x
    free, *_ = np.linalg.lstsq(np.stack([own, home], axis=1), y, rcond=None)
    loose = y - free[0] * own - free[1] * home
    total = max(float(y @ y), np.finfo(np.float64).tiny)
    return Covered(
        *what,
        slope=slope,
        r2=1.0 - float(residual @ residual) / total,
        size=float(np.median(np.abs(discount))),
        misfit=float(residual.std()),
        error=float(np.sqrt(residual @ residual / len(y) / (x @ x))),
        own=float(free[0]),
        home=float(free[1]),
        free_r2=1.0 - float(loose @ loose) / total,
    )


COVERED = {"P1": parity_slope}
