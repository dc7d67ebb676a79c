"""The bars that rates in the size table must keep: tests that hold, and tests known to be wrong that must fail."""

from __future__ import annotations

import re
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Bar:
    """Lowest and highest percentage that a test may show in the rows of a part whose name holds a pattern.

    `fails`: the test is known to be wrong here, and a simulation that does not show it is broken.
    """

    part: str
    rows: str
    test: str
    low: float
    high: float
    fails: bool = False


BARS = (
    Bar("currencies", "", "one-period", 3.5, 7),
    Bar("currencies", "N 1,", "draws", 3, 7),
    Bar("currencies", "N 10,", "draws", 3, 8),
    Bar("currencies", "N 10, T 240, h 12$", "bartlett", 13, 20, fails=True),
    Bar("currencies", "N 30,", "clustered: entity", 40, 100, fails=True),
    Bar("currencies", "h 12$", "clustered: date", 50, 100, fails=True),
    Bar("equities", "N 1,", "instrument", 1.5, 6),
    Bar("equities", "N 1,", "draws", 3, 7),
    Bar("equities", "N 15,", "instrument", 2, 9.5),
    Bar("equities", "N 15,", "draws", 3, 8),
    Bar("equities", r"N 1, T 480, h 60, phi 0\.985", "bartlett", 34, 100, fails=True),
    Bar("bonds", "", "draws", 3, 7.5),
    Bar("bonds", "N 1,", "instrument", 1, 5),
    Bar("bonds", r"1 root \.98, N 1, T 480, n 5", "bartlett", 18, 26, fails=True),
    Bar("joint", "currencies", "stacked one-period", 3.5, 8),
    Bar("joint", "", "draws", 3.5, 8),
    Bar("coverage", "", "one-period", 93.5, 97),
)


def bars_of(part: str, row: str, test: str) -> list[Bar]:
    """The bars that hold for one number of the table."""
    return [bar for bar in BARS if bar.part == part and bar.test == test and re.search(bar.rows, row)]


def outside(bar: Bar, percent: float, runs: int) -> bool:
    """Whether a percentage lies beyond its bar by more than two Monte Carlo errors."""
    low, high = allowed(bar, runs)
    return not low <= percent <= high


def allowed(bar: Bar, runs: int) -> tuple[float, float]:
    """The bar widened by two Monte Carlo errors, 200 sqrt(p (1 - p) / runs) points at each of its ends."""
    reach = [200 * (p * (1 - p) / runs) ** 0.5 for p in (bar.low / 100, bar.high / 100)]
    return bar.low - reach[0], bar.high + reach[1]
