"""Yields of any maturity from those quoted, by the declared rule; never beyond the shortest or the longest."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

import numpy as np
from scipy.interpolate import CubicSpline

from carrylab.data.calendar import Floats, Tenor
from carrylab.data.panel import Curves
from carrylab.errors import DataError
from carrylab.markets.tenors import same_length
from carrylab.options import Market


class YieldCurves:
    """Log zero yields (T, N, M) with the rule for maturities not quoted; `used` names those it filled since cleared."""

    def __init__(self, quoted: Curves, market: Market) -> None:
        self.quoted = quoted
        self.market = market
        self.used: set[str] = set()
        self._known: dict[float, Floats] = {}

    def quotes(self, maturity: Tenor) -> bool:
        """Whether this maturity is quoted or the rule can fill it."""
        years = self.quoted.years
        fills = self.market.missing_maturity != "exact" and years[0] < maturity.years < years[-1]
        return bool(fills) or same_length(self.quoted, maturity.years) is not None

    def yields(self, maturity: Tenor) -> Floats:
        """Log yield per year (T, N) of one maturity; DataError where neither quotes nor the rule give it."""
        key = round(maturity.years, 9)
        if key not in self._known:
            self._known[key] = self._find(maturity)
        if same_length(self.quoted, maturity.years) is None:
            self.used.add(maturity.canonical)
        return self._known[key]

    def price(self, maturity: Tenor) -> Floats:
        """Log price -n y(n) (T, N); zero for a bond that has matured."""
        if maturity == Tenor():
            return np.zeros(self.quoted.values.shape[:2])
        return -maturity.years * self.yields(maturity)

    def _find(self, maturity: Tenor) -> Floats:
        same = same_length(self.quoted, maturity.years)
        if same is not None:
            return self.quoted.values[:, :, self.quoted.tenors.index(same)]
        if not self.quotes(maturity):
            raise DataError(self._missing(maturity))
        return RULES[self.market.missing_maturity](self.quoted.years, self.quoted.values, maturity.years)

    def _missing(self, maturity: Tenor) -> str:
        names = [str(tenor) for tenor in self.quoted.tenors]
        known = ", ".join(names) if len(names) <= 12 else f"{names[0]} to {names[-1]} ({len(names)} maturities)"
        rules = '"linear in yield", "flat forward" or "cubic in yield"'
        return (
            f"market {self.market.name!r}: no yield of maturity {maturity}; quoted are {known}, missing_maturity is "
            f"{self.market.missing_maturity!r}; quote it, choose other maturities or horizons, or set missing_maturity "
            f"to {rules}, which fill between the quoted ones only"
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
        if len(own) < 3 or not own[0] < wanted < own[-1]:
            continue
        rows = which.ravel() == number
        flat_found[rows] = CubicSpline(own, flat[rows][:, pattern], axis=1, bc_type="natural")(wanted)
    return found


Rule = Callable[[Floats, Floats, float], Floats]
RULES: Mapping[str, Rule] = MappingProxyType(
    {"linear in yield": linear_in_yield, "flat forward": flat_forward, "cubic in yield": cubic_in_yield}
)
