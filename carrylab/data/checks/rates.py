"""Checks on rates and curves: units, and prices of zero-coupon bonds that cannot be."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from carrylab.data.calendar import Floats
from carrylab.data.checks.finding import Check, Dense
from carrylab.data.checks.limits import HIGH_DECIMAL, IMPOSSIBLE_SHARE, LOW_PERCENT, LOW_POINTS, LOWEST_FORWARD, PRICES
from carrylab.data.panel import Curves, curves
from carrylab.data.read import MarketData
from carrylab.errors import DataError


def units(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """U1: rates whose size does not fit the declared unit; an error where the prices they imply cannot be."""
    for one in tables:
        if one.role not in ("zero_yields", "deposits") or one.table.source.compounding == "discount factor":
            continue
        size, unit = np.abs(one.values[np.isfinite(one.values)]), one.table.source.unit
        if not len(size):
            continue
        share = _impossible(data, one)
        advice = _other_unit(unit, size) or "check unit and compounding"
        if share > IMPOSSIBLE_SHARE:
            seen = f"declared {unit}, but the median rate is {np.median(size):.3g}: {share:.0%} of the implied prices"
            seen += f" of zero-coupon bonds are outside {PRICES[0]:g} to {PRICES[1]:g}"
            yield one.whole(("U1", "error"), (seen, advice))
        elif _other_unit(unit, size):
            seen = f"declared {unit}, but the median rate is {np.median(size):.3g} and the largest {size.max():.3g}"
            yield one.whole(("U1", "warning"), (seen, advice))


def _other_unit(unit: str, size: Floats) -> str:
    """The unit that rates of this size look like, as advice; empty where the declared one will do."""
    if unit == "decimal" and np.median(size) > HIGH_DECIMAL:
        return 'percent? then declare unit = "percent"'
    if unit == "percent" and size.max() < LOW_PERCENT:
        return 'decimals? then declare unit = "decimal"'
    if unit == "percent" and np.median(size) > 100.0 * HIGH_DECIMAL:
        return 'basis points? then declare unit = "basis points"'
    if unit == "basis points" and size.max() < LOW_POINTS:
        return 'percent? then declare unit = "percent"'
    return ""


def _impossible(data: MarketData, one: Dense) -> float:
    """Share of the implied prices of zero-coupon bonds that cannot be; all where a rate leaves no growth factor."""
    found = _curves(data, one)
    if found is None:
        return 1.0
    prices = np.exp(-found.years * found.values)
    known = prices[np.isfinite(prices)]
    return float(((known < PRICES[0]) | (known > PRICES[1])).mean())


def _curves(data: MarketData, one: Dense) -> Curves | None:
    """Log rates of one table; None where they leave no growth factor above zero."""
    key = "economy" if one.role == "zero_yields" else "currency"
    length = "maturity" if one.role == "zero_yields" else "tenor"
    try:
        return curves((one.table,), data.calendar, key, length)
    except DataError:
        return None


def curve(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """R2: prices that rise with maturity though yields are above zero, or forward rates far below zero."""
    for one in tables:
        found = _curves(data, one) if one.role == "zero_yields" else None
        if found is None or len(found.tenors) < 3:
            continue
        for n, code in enumerate(found.codes):
            yield from _bad_nodes(one, found, n, code)


def _bad_nodes(one: Dense, found: Curves, n: int, code: str) -> Iterator[Check]:
    yields, years = found.values[:, n], found.years
    forwards = np.diff(yields * years, axis=1) / np.diff(years)
    positive = (yields[:, 1:] > 0) & (yields[:, :-1] > 0)
    bad = (forwards < LOWEST_FORWARD) | ((forwards < 0) & positive)
    nodes: dict[int, list[int]] = {}
    for t, m in np.argwhere(bad):
        nodes.setdefault(_culprit(yields[t], years, int(m)), []).append(int(t))
    for m, rows in nodes.items():
        worst = min(rows, key=lambda t: float(np.nanmin(forwards[t])))
        seen = f"forward rate of {np.nanmin(forwards[worst]):.1%} beside it in {len(set(rows))} periods"
        where = one.label(worst)
        label = f"{code} {found.tenors[m]}"
        yield Check("R2", "warning", one.file, label, where, where, seen, "a slipped digit? check this yield")


def _culprit(yields: Floats, years: Floats, m: int) -> int:
    """Of the two ends of a bad forward rate, the one that stands further from the line through its neighbours."""

    def off(node: int) -> float:
        low, high = max(node - 1, 0), min(node + 1, len(years) - 1)
        line = np.interp(years[node], [years[low], years[high]], [yields[low], yields[high]])
        return float(abs(yields[node] - line)) if low < node < high else 0.0

    return m if off(m) > off(m + 1) else m + 1


RATES = {"U1": units, "R2": curve}
