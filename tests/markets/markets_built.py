"""Markets built in memory: tables of arrays, as the readers hand them on, and the parities made of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from carrylab.data.calendar import Floats, Interval, last_day, make_calendar, ordinal, parse_tenor
from carrylab.data.read import MarketData, Table
from carrylab.markets import MARKETS
from carrylab.markets.parity import Leg, Parity
from carrylab.options import Inference, LegColumn, Market, PanelColumns, Source

START = np.array(["2000-01-31"], dtype="datetime64[D]")
ECONOMIES = {"EH": "HHH", "EA": "AAA", "EB": "BBB"}
Columns = Mapping[tuple[str, ...], Sequence[float] | Floats]


def table(role: str, keys: str, columns: Columns, *, interval: Interval = "month", **declared: Any) -> Table:
    """One source as read: `columns` maps the codes of a series to its values from 2000-01 on, NaN for a hole."""
    names = tuple(keys.split())
    values = np.stack([np.asarray(column, dtype=float) for column in columns.values()], axis=1)
    numbers = ordinal(START, interval)[0] + np.arange(len(values))
    t, i = np.nonzero(np.isfinite(values))
    order = np.lexsort((t, i))
    t, i = t[order], i[order]
    codes = np.array(list(columns)).reshape(len(columns), len(names))
    frame = pd.DataFrame(
        {"row": t * len(columns) + i + 2, "date": last_day(numbers, interval)[t], "ordinal": numbers[t]}
    )
    for at, name in enumerate(names):
        frame[name] = pd.Categorical(codes[i, at])
    source = Source(role=role, path=Path(f"{role}.csv"), file=f"{role}.csv", **declared)
    return Table(source, names, frame.assign(value=values[t, i]), pd.DataFrame())


def market(kind: str, parities: str, *tables: Table, **options: Any) -> MarketData:
    """A market of these tables with one parity; lengths of time are written as texts."""
    for key in ("horizons", "maturities"):
        if key in options:
            options[key] = tuple(parse_tenor(text) for text in options[key].split())
    if "short" in options:
        options["short"] = parse_tenor(options["short"])
    options = {"interval": "month", "home": "HHH", "horizons": (), **options}
    declared = Market(
        name="M", kind=kind, parities=tuple(parities.split()), inference=Inference(), sources={}, **options
    )
    roles: dict[str, tuple[Table, ...]] = {}
    for one in tables:
        roles[one.source.role] = (*roles.get(one.source.role, ()), one)
    observed = np.concatenate([one.frame["ordinal"].to_numpy() for one in tables])
    return MarketData(declared, roles, (), make_calendar(declared.interval, observed))


def built(data: MarketData, economies: Mapping[str, str] = ECONOMIES) -> list[Parity]:
    """The parities of a market."""
    return MARKETS[data.market.kind](data, economies)


def one(data: MarketData, economies: Mapping[str, str] = ECONOMIES) -> Parity:
    """The only parity of a market."""
    (parity,) = built(data, economies)
    return parity


def leg(parity: Parity, name: str) -> Leg:
    """One leg by its name."""
    return next(leg for leg in parity.legs if leg.name == name)


def total(parity: Parity) -> Floats:
    """Sum of weight x leg (T, N)."""
    return np.sum([leg.weight * leg.values for leg in parity.legs], axis=0)


def steps_summed(parity: Parity, leg: Leg) -> Floats:
    """The one-period outcomes of every origin (T, N), weighted and added up over its horizon."""
    found = np.full_like(leg.values, np.nan)
    rows = np.arange(len(found))
    H = int(np.max(parity.window.ends - rows))
    weights = np.ones(H) if leg.step_weights is None else leg.step_weights
    for t in rows[: len(found) - H]:
        steps = leg.one_step[t] if leg.one_step.ndim == 3 else leg.one_step[t + 1 : t + H + 1].T
        found[t] = steps @ weights
    return found


@dataclass(frozen=True)
class Case:
    """One parity on random data: how its market is declared."""

    kind: str
    parity: str
    options: Mapping[str, Any]

    def __str__(self) -> str:
        return " ".join([self.parity, *(str(value) for value in self.options.values())])


CASES = (
    Case("bonds", "forward-spot", {"horizons": "3m", "maturities": "6m 12m"}),
    Case("bonds", "forward-spot", {"horizons": "1m", "maturities": "2m 24m"}),
    Case("bonds", "forward-spot", {"horizons": "12m", "maturities": "30m", "missing_maturity": "flat forward"}),
    Case("bonds", "forward-spot", {"horizons": "12m", "maturities": "29m", "missing_maturity": "linear in yield"}),
    Case("bonds", "forward-spot", {"horizons": "7m", "maturities": "29m", "missing_maturity": "cubic in yield"}),
    Case("bonds", "forward-spot-far", {"short": "3m", "maturities": "6m 12m"}),
    Case("bonds", "yield-spread", {"horizons": "3m", "maturities": "6m 12m"}),
    Case("bonds", "yield-spread-to-maturity", {"short": "3m", "maturities": "6m 12m"}),
    Case("bonds", "carry", {"horizons": "3m", "maturities": "6m 12m"}),
    Case("currencies", "uncovered-interest", {"horizons": "1m 3m 12m"}),
    Case("currencies", "uncovered-interest", {"horizons": "2m", "missing_tenor": "linear in rate"}),
    Case("currencies", "forward-discount", {"horizons": "1m 3m"}),
    Case("currencies", "forward-discount", {"horizons": "12m", "missing_tenor": "nearest"}),
    Case("currencies", "carry", {"horizons": "3m"}),
    Case("equities", "dividend-price", {"horizons": "12m 24m", "rho": 0.96}),
    Case("equities", "dividend-price", {"horizons": "12m", "rho": 0.96, "dividends": "total return"}),
    Case("equities", "dividend-price", {"horizons": "12m", "rho": 0.96, "dividends": "per period"}),
    Case("equities", "dividend-price", {"horizons": "12m", "rho": 0.96, "currency": "home unhedged"}),
    Case("equities", "dividend-price", {"horizons": "12m", "rho": 0.96, "currency": "home hedged"}),
    Case("equities", "dividend-price", {"horizons": "24m", "rho": 0.96, "bills": "3m"}),
    Case("equities", "carry", {"horizons": "3m 12m"}),
    Case("equities", "carry", {"horizons": "3m", "currency": "home unhedged"}),
    Case("equities", "carry", {"horizons": "3m", "currency": "home hedged"}),
    Case("columns", "columns", {"horizons": "3m"}),
)
T_RANDOM = 48


def random_market(case: Case, seed: int, *, holes: float = 0.0, scale: float = 0.05) -> MarketData:
    """A market of this case with random walks for prices and random rates, and holes of a given share."""
    rng = np.random.default_rng(seed)

    def rates(*keys: Sequence[str]) -> dict[tuple[str, ...], Floats]:
        names = [(a, b) for a in keys[0] for b in keys[1]]
        return {name: _with_holes(rng, scale * rng.normal(size=T_RANDOM), holes) for name in names}

    def prices(keys: Sequence[str], level: float = 1.0) -> dict[tuple[str, ...], Floats]:
        walks = {(key,): level * np.exp(np.cumsum(scale * rng.normal(size=T_RANDOM))) for key in keys}
        return {key: _with_holes(rng, walk, holes) for key, walk in walks.items()}

    options = dict(case.options)
    make = {"bonds": _bonds, "currencies": _currencies, "equities": _equities, "columns": _own}[case.kind]
    return make(case, options, rates, prices)


def _with_holes(rng: np.random.Generator, values: Floats, share: float) -> Floats:
    return np.where(rng.random(len(values)) < share, np.nan, values)


def _bonds(case: Case, options: dict[str, Any], rates: Any, prices: Any) -> MarketData:
    months = (1, 3, 6, 9, 18, 30, 36) if "missing_maturity" in options else range(1, 37)
    yields = table("zero_yields", "economy maturity", rates(("EA", "EB"), [f"{n}m" for n in months]))
    return market("bonds", case.parity, yields, **options)


def _exchange(rates: Any, prices: Any) -> tuple[Table, Table, Table]:
    spot = prices(("AAA", "BBB"))
    ahead = {
        (code, tenor): spot[code,] * np.exp(change)
        for (code, tenor), change in rates(("AAA", "BBB"), ("1m", "3m")).items()
    }
    deposits = rates(("HHH", "AAA", "BBB"), ("1m", "3m", "12m"))
    return (
        table("spot", "currency", spot, quote="home per foreign"),
        table("forwards", "currency tenor", ahead, quote="home per foreign"),
        table("deposits", "currency tenor", deposits),
    )


def _currencies(case: Case, options: dict[str, Any], rates: Any, prices: Any) -> MarketData:
    return market("currencies", case.parity, *_exchange(rates, prices), **options)


def _equities(case: Case, options: dict[str, Any], rates: Any, prices: Any) -> MarketData:
    bills = (options.pop("bills"),) if "bills" in options else ("1m", "3m", "12m")
    basis = options.pop("dividends", "trailing 12 months")
    indices = ("EH", "EA")
    tables = [
        table("prices", "economy", prices(indices, 100.0)),
        table("deposits", "currency tenor", rates(("HHH", "AAA"), bills)),
    ]
    if basis == "total return":
        # Dividends are above zero where the total return beats the price return in every month.
        shares = {key: np.exp(0.01 * np.arange(T_RANDOM)) for key in ((code,) for code in indices)}
        price = tables[0].frame.pivot_table(index="ordinal", columns="economy", values="value", observed=True)
        price = price.reindex(np.arange(T_RANDOM) + ordinal(START, "month")[0])
        index = {key: price[key[0]].to_numpy() * shares[key] for key in shares}
        tables.append(table("total_return", "economy", index))
    else:
        level = 4.0 if basis == "trailing 12 months" else 0.3
        tables.append(table("dividends", "economy", prices(indices, level), basis=basis))
    if "currency" in options:
        spot, forwards, _ = _exchange(rates, prices)
        tables += [spot, forwards]
    return market("equities", case.parity, *tables, tolerance=9.0, **options)


def _own(case: Case, options: dict[str, Any], rates: Any, prices: Any) -> MarketData:
    found = rates(("EA", "EB"), ("spread", "rise"))
    parts = {
        name: table("panel", "entity", {(code,): values for (code, own), values in found.items() if own == name})
        for name in ("spread", "rise")
    }
    rises = parts["rise"].frame.rename(columns={"value": "rise"})[["entity", "ordinal", "rise"]]
    frame = parts["spread"].frame.rename(columns={"value": "spread"}).merge(rises, on=["entity", "ordinal"])
    panel = replace(parts["spread"], frame=frame.assign(paid=frame["spread"] - frame["rise"]))
    legs = (
        LegColumn("excess return", "paid", 1.0, 0.0, "return"),
        LegColumn("rate rise", "rise", 1.0, 1.0, "fundamental"),
    )
    return market("columns", "columns", panel, panel=PanelColumns("entity", "spread", legs), **options)


def changed_after(data: MarketData, row: int, factor: float) -> MarketData:
    """The market with every raw value after one row of its calendar multiplied."""
    after = data.calendar.ordinals[row]

    def change(one: Table) -> Table:
        later = (one.frame["ordinal"] > after).to_numpy()
        names = [name for name in one.frame.columns[3:] if name not in one.keys]
        return replace(one, frame=one.frame.assign(**{n: one.frame[n] * np.where(later, factor, 1.0) for n in names}))

    return replace(data, tables={role: tuple(map(change, tables)) for role, tables in data.tables.items()})
