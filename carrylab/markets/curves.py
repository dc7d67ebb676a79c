"""Yields of any maturity from those quoted, by the declared rule; never beyond the shortest or the longest."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from types import MappingProxyType

import numpy as np
from scipy.interpolate import CubicSpline

from carrylab.data.calendar import Floats, Tenor
from carrylab.data.files import shown
from carrylab.data.panel import Curves
from carrylab.markets.tenors import same_length
from carrylab.options import Market

POINTS: Mapping[str, int] = MappingProxyType({"linear in yield": 2, "flat forward": 2, "cubic in yield": 3})


class YieldCurves:
    """Log zero yields (T, N, M) with the rule for maturities not quoted, on each economy's own quotes.

    Since they were last cleared, `used` holds the economies of each maturity that the rule filled, and `lacking` the
    first maturity of each economy that neither quotes nor the rule gave.
    """

    def __init__(self, quoted: Curves, market: Market) -> None:
        self.quoted = quoted
        self.market = market
        self.used: dict[Tenor, list[str]] = {}
        self.lacking: dict[str, Tenor] = {}
        self._alike = quoted.alike()
        self._known: dict[float, Floats] = {}

    def clear(self) -> None:
        """Forget which maturities were filled and which are lacking."""
        self.used.clear()
        self.lacking.clear()

    def lacks(self, maturity: Tenor) -> list[str]:
        """Economies with yields of which this maturity is neither quoted nor can be filled."""
        return [code for own in self._alike if own.tenors and not self._stands(own, maturity) for code in own.codes]

    def _stands(self, own: Curves, maturity: Tenor) -> bool:
        fills = len(own.tenors) >= POINTS.get(self.market.missing_maturity, np.inf)
        between = fills and own.years[0] < maturity.years < own.years[-1]
        return bool(between) or same_length(own, maturity.years) is not None

    def yields(self, maturity: Tenor) -> Floats:
        """Log yield per year (T, N) of one maturity, a hole for economies that lack it."""
        key = round(maturity.years, 9)
        if key not in self._known:
            self._known[key] = self._find(maturity)
        self.lacking = dict.fromkeys(self.lacks(maturity), maturity) | self.lacking
        for own in self._alike:
            if self._stands(own, maturity) and same_length(own, maturity.years) is None:
                self.used[maturity] = sorted({*self.used.get(maturity, ()), *own.codes})
        return self._known[key]

    def price(self, maturity: Tenor) -> Floats:
        """Log price -n y(n) (T, N); zero for a bond that has matured."""
        if maturity == Tenor():
            return np.zeros(self.quoted.values.shape[:2])
        return -maturity.years * self.yields(maturity)

    def _find(self, maturity: Tenor) -> Floats:
        found = np.full(self.quoted.values.shape[:2], np.nan)
        for own in self._alike:
            same = same_length(own, maturity.years)
            at = [self.quoted.codes.index(code) for code in own.codes]
            if same is not None:
                found[:, at] = own.values[:, :, own.tenors.index(same)]
            elif self._stands(own, maturity):
                found[:, at] = RULES[self.market.missing_maturity](own.years, own.values, maturity.years)
        return found

    def filled(self) -> str:
        """The maturities that the rule filled, in words; the economies where it did not fill all."""
        parts = [
            tenor.canonical + ("" if len(codes) == len(self.quoted.codes) else f" of {' and '.join(codes)}")
            for tenor, codes in sorted(self.used.items())
        ]
        return shown(parts)

    def missing(self, codes: Sequence[str], bonds: Sequence[str]) -> str:
        """One line on the first of the economies that lack a maturity; `bonds` are the entities one may leave out."""
        (own,) = (one for one in self._alike if codes[0] in one.codes)
        names = [str(tenor) for tenor in own.tenors]
        known = ", ".join(names) if len(names) <= 12 else f"{names[0]} to {names[-1]} ({len(names)} maturities)"
        also = f" (and for {shown(codes[1:])})" if len(codes) > 1 else ""
        rules = '"linear in yield", "flat forward" or "cubic in yield" (of three or more)'
        out = f"add {', '.join(map(repr, bonds))} to leave_out, " if bonds else ""
        return (
            f"market {self.market.name!r}: no yield of maturity {self.lacking[codes[0]]} for {codes[0]}{also}, which "
            f"quotes {known}; missing_maturity is {self.market.missing_maturity!r}; quote it, choose other maturities "
            f"or horizons, {out}or set missing_maturity to {rules}, which fill between the quoted "
            "ones only"
        )


def linear_in_yield(years: Floats, yields: Floats, wanted: float) -> Floats:
    """Straight line in the yield between the two quoted maturities around the wanted one."""
    above = int(np.searchsorted(years, wanted))
    share = (wanted - years[above - 1]) / (years[above] - years[above - 1])
    return np.asarray((1 - share) * yields[:, :, above - 1] + share * yields[:, :, above])


def flat_forward(years: Floats, yields: Floats, wanted: float) -> Floats:
    """Constant forward rate between the two maturities, so the log price is linear."""
    return linear_in_yield(years, yields * years, wanted) / wanted


def cubic_in_yield(years: Floats, yields: Floats, wanted: float) -> Floats:
    """Natural cubic spline of the yield through the maturities that stand on each date."""
    found = np.full(yields.shape[:2], np.nan)
    stands = np.isfinite(yields)
    patterns, which = np.unique(stands.reshape(-1, len(years)), axis=0, return_inverse=True)
    flat, flat_found = yields.reshape(-1, len(years)), found.reshape(-1)
    for number, pattern in enumerate(patterns):
        own = years[pattern]
        if len(own) < POINTS["cubic in yield"] or not own[0] < wanted < own[-1]:
            continue
        rows = which.ravel() == number
        flat_found[rows] = CubicSpline(own, flat[rows][:, pattern], axis=1, bc_type="natural")(wanted)
    return found


Rule = Callable[[Floats, Floats, float], Floats]
RULES: Mapping[str, Rule] = MappingProxyType(
    {"linear in yield": linear_in_yield, "flat forward": flat_forward, "cubic in yield": cubic_in_yield}
)
