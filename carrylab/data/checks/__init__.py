"""Load checks: one finding a line, with level, file, series, dates, what was seen and what to do."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from types import MappingProxyType

from carrylab.data.checks.covered import COVERED
from carrylab.data.checks.currencies import CURRENCIES
from carrylab.data.checks.equities import EQUITIES
from carrylab.data.checks.finding import Check, Dense, dense_tables
from carrylab.data.checks.jumps import JUMPS
from carrylab.data.checks.rates import RATES
from carrylab.data.checks.series import SERIES
from carrylab.data.checks.timing import TIMING
from carrylab.data.checks.triangles import TRIANGLES
from carrylab.data.read import MarketData

__all__ = ["REGISTRY", "Check", "check_market"]

REGISTRY: Mapping[str, Callable[[MarketData, Sequence[Dense]], Iterable[Check]]] = MappingProxyType(
    {**RATES, **COVERED, **TRIANGLES, **CURRENCIES, **SERIES, **TIMING, **JUMPS, **EQUITIES}
)


def check_market(data: MarketData) -> list[Check]:
    """Every finding of every load check on one market, errors first."""
    tables = dense_tables(data)
    found = [one for check in REGISTRY.values() for one in check(data, tables)]
    return sorted(found, key=lambda one: ("error", "warning", "note").index(one.level))
