"""Triangles of exchange rates: three pairs of three currencies must multiply to one (P2)."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np

from carrylab.data.calendar import Floats
from carrylab.data.checks.finding import Bools, Check, Dense, Level, runs
from carrylab.data.checks.limits import TRIANGLE, TRIANGLE_ERROR
from carrylab.data.quotes import split_pair
from carrylab.data.read import MarketData


@dataclass(frozen=True, eq=False, slots=True)
class Leg:
    """One quoted pair: log `price` (T,) of the base in the quote currency, and half its spread in logs (T,)."""

    dense: Dense
    at: int
    base: str
    quote: str
    price: Floats
    half: Floats

    def towards(self, currency: str) -> Floats:
        """Log price of the other currency in this one."""
        return self.price if currency == self.quote else -self.price


@dataclass(frozen=True, eq=False, slots=True)
class Loop:
    """Three legs, the logs (3, T) whose sum `gap` (T,) should be zero, and where it is beyond the spreads."""

    legs: tuple[Leg, Leg, Leg]
    logs: Floats
    gap: Floats
    open: Bools

    def turned(self) -> Leg | None:
        """The leg whose log, taken away twice, closes the open loop best; None where none does."""
        gap = self.gap[self.open]
        left = np.median(np.abs(gap - 2.0 * self.logs[:, self.open]), axis=1)
        return self.legs[int(left.argmin())] if left.min() < np.median(np.abs(gap)) / 10.0 else None


def triangle(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """P2: |ln S_ab + ln S_bc + ln S_ca| above the half spreads and ten basis points, in every loop of three pairs."""
    home = data.market.home or ""
    loops = list(_loops(_legs(tables, home)))
    guilt = _guilt(loops)
    blamed: dict[Leg, list[Loop]] = {}
    for loop in loops:
        if loop.open.any():
            # Without a leg that looks turned: the one most loops speak against, a cross before a rate with home.
            suspect = max(loop.legs, key=lambda leg: (guilt[leg], home not in (leg.base, leg.quote)))
            blamed.setdefault(loop.turned() or suspect, []).append(loop)
    for leg, own in blamed.items():
        yield _finding(leg, own)


def _legs(tables: Sequence[Dense], home: str) -> dict[frozenset[str], Leg]:
    """Every pair of two currencies once; the first series that quotes it stands for it."""
    found: dict[frozenset[str], Leg] = {}
    for one in tables:
        if one.role != "spot":
            continue
        for at, label in enumerate(one.labels):
            base, quote = _currencies(one, label, home)
            if base != quote:
                half = np.nan_to_num(one.spread[:, at] / one.values[:, at] / 2.0)
                leg = Leg(one, at, base, quote, one.logs()[:, at], half)
                found.setdefault(frozenset((base, quote)), leg)
    return found


def _currencies(one: Dense, label: str, home: str) -> tuple[str, str]:
    if one.table.source.quote == "pair":
        return split_pair(one.table.source, label)
    return (label, home) if one.table.source.quote == "home per foreign" else (home, label)


def _loops(legs: Mapping[frozenset[str], Leg]) -> Iterator[Loop]:
    codes = sorted({code for pair in legs for code in pair})
    for a, b, c in combinations(codes, 3):
        pairs = [frozenset(pair) for pair in ((a, b), (b, c), (c, a))]
        if all(pair in legs for pair in pairs):
            first, second, third = (legs[pair] for pair in pairs)
            logs = np.stack([first.towards(b), second.towards(c), third.towards(a)])
            gap = logs.sum(axis=0)
            beyond = np.nan_to_num(np.abs(gap)) > first.half + second.half + third.half + TRIANGLE
            yield Loop((first, second, third), logs, gap, beyond)


def _guilt(loops: Sequence[Loop]) -> Counter[Leg]:
    """Open loops less closed ones of every leg."""
    guilt: Counter[Leg] = Counter()
    for loop in loops:
        for leg in loop.legs:
            guilt[leg] += 1 if loop.open.any() else -1
    return guilt


def _finding(leg: Leg, loops: Sequence[Loop]) -> Check:
    beyond = np.logical_or.reduce([loop.open for loop in loops])
    largest = max(float(np.abs(loop.gap[loop.open]).max()) for loop in loops)
    turned = any(loop.turned() is leg for loop in loops)
    level: Level = "error" if turned or largest > TRIANGLE_ERROR else "warning"
    others = [f"{one.base}{one.quote}" for one in loops[0].legs if one is not leg]
    seen = f"the triangle with {' and '.join(others)} is open by up to {largest:.2%} in {int(beyond.sum())} periods"
    seen += f", and {len(loops) - 1} more" if len(loops) > 1 else ""
    label = leg.dense.labels[leg.at]
    if turned:
        advice = f"{label} looks turned round"
    elif level == "error":
        advice = "check which of the three rates is wrong"
    else:
        advice = "rates of another hour, or rounded? check which of the three is wrong"
    spans = runs(beyond)
    return leg.dense.found(("P2", level), leg.at, slice(spans[0].start, spans[-1].stop), (seen, advice))


TRIANGLES = {"P2": triangle}
