"""Each market's parities: a signal, its legs, their weights. Nothing here knows of regressions."""

from collections.abc import Callable, Mapping
from types import MappingProxyType

from carrylab.data.read import MarketData
from carrylab.markets import bonds, columns, currencies, equities
from carrylab.markets.parity import Parity

MARKETS: Mapping[str, Callable[[MarketData, Mapping[str, str]], list[Parity]]] = MappingProxyType(
    {
        "bonds": bonds.parities,
        "currencies": currencies.parities,
        "equities": equities.parities,
        "columns": columns.parities,
    }
)
