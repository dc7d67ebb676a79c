"""Load checks: one finding a line, with level, file, series, dates, what was seen and what to do."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal

from carrylab.data.read import MarketData


@dataclass(frozen=True, slots=True)
class Check:
    """One finding of a load check; `first` and `last` are period names or empty."""

    id: str
    level: Literal["error", "warning", "note"]
    file: str
    series: str
    first: str
    last: str
    seen: str
    advice: str

    def line(self) -> str:
        """The one printed line."""
        dates = self.first if self.first == self.last else f"{self.first} to {self.last}"
        place = " ".join(part for part in (self.file, self.series, dates) if part)
        return f"{self.level} {self.id} {place}: {self.seen}; {self.advice}"


REGISTRY: Mapping[str, Callable[[MarketData, Mapping[str, str]], list[Check]]] = {}


def check_market(data: MarketData, economies: Mapping[str, str]) -> list[Check]:
    """Every finding of every load check on one market."""
    return [found for check in REGISTRY.values() for found in check(data, economies)]
