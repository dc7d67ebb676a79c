"""Bonds of one market as they are bought and held: yields of any maturity, and returns period by period."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np

from carrylab.data.calendar import Calendar, Floats, Tenor, Window, lead, window
from carrylab.data.read import MarketData
from carrylab.markets.curves import YieldCurves
from carrylab.markets.tenors import step_tenor


@dataclass(frozen=True, eq=False, slots=True)
class Bonds:
    """The curves of one market, its data and options, and the currency of each economy."""

    data: MarketData
    curves: YieldCurves
    economies: Mapping[str, str]

    @property
    def calendar(self) -> Calendar:
        """The market's calendar."""
        return self.data.calendar

    def window(self, horizon: Tenor) -> Window:
        """Where the outcomes of one horizon stand."""
        return window(self.calendar, horizon, self.data.market.max_gap)


@dataclass(frozen=True, eq=False, slots=True)
class Steps:
    """One-period returns (T, N, H) by origin and step, or None and the `note` that says why."""

    values: Floats | None
    note: str = ""

    def times(self, factor: float) -> Floats | None:
        """The returns times a factor."""
        return None if self.values is None else factor * self.values


def in_study(bonds: Bonds, n: Tenor, codes: Iterable[str]) -> list[str]:
    """Economies whose bond of this maturity the study does not leave out."""
    out = set(bonds.data.market.leave_out)
    return [code for code in codes if not out & {f"{code} {n}", code, bonds.economies.get(code, "")}]


def ahead(bonds: Bonds, values: Floats, by: Tenor) -> Floats:
    """Values (T, ...) as they stand some time on."""
    return values if by == Tenor() else lead(values, bonds.window(by))


def one_period_returns(bonds: Bonds, n: Tenor, h: Tenor, *, rolls: int = 1) -> Steps:
    """Excess returns of the bought bond period by period, (T, N, H) by origin and step, or why they are unknown.

    In step s the n-bond has n - (s-1) steps left and the h-bond h - (s-1): its return less that of the h-bond. They
    add up exactly to the excess return over h; with `rolls`, over so many h-bonds one after the other.
    """
    step = step_tenor(bonds.calendar)
    count = round(h.years / step.years) if step else 0
    if step is None or h != step.times(count):
        interval = bonds.calendar.interval
        return Steps(None, f"returns over {h} are not made of {interval}s, so there are no one-period errors")
    if any(table.source.timing == "average" for table in bonds.data.tables["zero_yields"]):
        return Steps(None, "yields are period averages, so there are no one-period errors")
    lives = [(n - step.times(s), h - step.times(s % count)) for s in range(rolls * count)]
    wanted = {life - gone for pair in lives for life in pair for gone in (Tenor(), step)} - {Tenor()}
    missing = [life.canonical for life in sorted(wanted) if in_study(bonds, n, bonds.curves.lacks(life))]
    if missing:
        every = f"every {bonds.calendar.interval} of a bond's life"
        return Steps(None, f"yields of {every} are not quoted ({missing[0]} is missing): no one-period errors")

    def worth(pair: tuple[Tenor, Tenor], gone: Tenor, at: int) -> Floats:
        long, short = (bonds.curves.price(life - gone) for life in pair)
        return ahead(bonds, long - short, step.times(at))

    return Steps(np.stack([worth(pair, step, s + 1) - worth(pair, Tenor(), s) for s, pair in enumerate(lives)], axis=2))
