"""Currencies: uncovered interest parity, the forward discount, and carry.

s is the log home price of one unit of foreign currency, f the log forward price, i and i* the home and foreign log
rates per year, h the horizon in years. Long the foreign currency:
    h(i* - i) = [s_{t+h} - s_t + h(i* - i)] - [s_{t+h} - s_t]          uncovered interest
    s_t - f_t = [s_{t+h} - f_t] - [s_{t+h} - s_t]                      forward discount (Fama 1984, JME 14:319)
With constant expected returns the excess return has slope 0 and the appreciation slope -1.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from carrylab.data.calendar import Floats, Tenor, Window, horizon_years, lead, window
from carrylab.data.files import shown
from carrylab.data.panel import Curves, Panel, curves
from carrylab.data.quotes import forward_quotes, spot_quotes
from carrylab.data.read import MarketData
from carrylab.errors import DataError
from carrylab.markets.parity import Entity, Leg, Parity
from carrylab.markets.tenors import rates_at, same_length, step_tenor
from carrylab.options import Market

CHANGES = {"carry": "price change beyond the carry"}


@dataclass(frozen=True, eq=False, slots=True)
class Currencies:
    """Spot (T, N), rate differentials and forwards of one currency market; `rates` and `forwards` may be absent."""

    codes: tuple[str, ...]
    spot: Floats
    rates: Curves | None
    forwards: Curves | None


def parities(data: MarketData, economies: Mapping[str, str]) -> list[Parity]:
    """Every currency parity of the study, one for each horizon."""
    world = read_currencies(data)
    entities = tuple(Entity(code, _economy(code, economies), code) for code in world.codes)
    return [
        _parity(data, world, entities, (name, horizon))
        for name in data.market.parities
        for horizon in data.market.horizons
    ]


def _economy(currency: str, economies: Mapping[str, str]) -> str:
    return next((economy for economy, own in economies.items() if own == currency), "")


def read_currencies(data: MarketData) -> Currencies:
    """Spot, deposits and forwards as dense arrays; currencies are those with a spot rate against home."""
    home = str(data.market.home)
    spot = spot_quotes(data.tables["spot"], data.calendar, home).home
    deposits = data.tables.get("deposits")
    forwards = data.tables.get("forwards")
    rates = curves(deposits, data.calendar, "currency", "tenor") if deposits else None
    outright = forward_quotes(forwards, data.tables["spot"], data.calendar, home) if forwards else None
    return Currencies(
        codes=spot.codes,
        spot=spot.values,
        rates=rates and rates.of((home, *spot.codes)),
        forwards=outright and outright.of(spot.codes),
    )


def _parity(data: MarketData, world: Currencies, entities: tuple[Entity, ...], what: tuple[str, Tenor]) -> Parity:
    name, horizon = what
    market, calendar = data.market, data.calendar
    at = window(calendar, horizon, market.max_gap)
    by_rates = name == "uncovered-interest" or (name == "carry" and world.rates is not None)
    forward, notes = forward_price(data, world, horizon, by_rates=by_rates)
    later = lead(world.spot, at)
    one_step, step_notes = _one_step(data, world, (horizon, forward), at, by_rates=by_rates)
    return Parity(
        market=market.name,
        name=name,
        horizon=horizon,
        calendar=calendar,
        window=at,
        entities=entities,
        signal_name="rate differential" if by_rates else "forward discount",
        signal=world.spot - forward,
        legs=(
            Leg("excess return", "return", later - forward, 1.0, 0.0, one_step),
            Leg(CHANGES.get(name, "foreign appreciation"), "fundamental", later - world.spot, -1.0, -1.0, one_step),
        ),
        notes=(*notes, *step_notes),
    )


def forward_price(
    data: MarketData, world: Currencies, horizon: Tenor, *, by_rates: bool
) -> tuple[Floats, tuple[str, ...]]:
    """Log forward price (T, N): quoted, or s - h(i* - i) from rates; and notes on the lengths used."""
    market = data.market
    if not by_rates:
        return _quoted_forward(market, world, horizon)
    if world.rates is None:
        raise DataError(f"market {market.name!r}: uncovered-interest needs deposits; declare them in its data")
    if market.home not in world.rates.codes:
        known = ", ".join(world.rates.codes)
        raise DataError(f"market {market.name!r}: no deposits of the home currency {market.home!r}; found {known}")
    rates, notes = rates_at(world.rates, horizon, market, "deposits")
    h = horizon_years(horizon, data.calendar.interval)
    panel = Panel(world.rates.codes, rates)
    if np.isnan(panel.column(str(market.home))).all():
        raise DataError(
            f"market {market.name!r}: no deposits of {horizon} of the home currency {market.home!r}, missing_tenor is "
            f"{market.missing_tenor!r}; quote that length, or choose other horizons or another missing_tenor"
        )
    differential = _differential(panel, world, str(market.home))
    return world.spot - h * differential, (*_absent("deposits", world, panel), *notes)


def _absent(role: str, world: Currencies, quoted: Panel) -> tuple[str, ...]:
    """A note on the currencies with a spot rate that the file of another role does not hold."""
    absent = [code for code in world.codes if code not in quoted.codes]
    return (f"no {role} ({shown(absent)})",) if absent else ()


def _quoted_forward(market: Market, world: Currencies, horizon: Tenor) -> tuple[Floats, tuple[str, ...]]:
    if world.forwards is None:
        raise DataError(f"market {market.name!r}: forward-discount needs forwards; declare them in its data")
    # Between quoted lengths the discount is interpolated per year, not the price.
    spot = Panel(world.codes, world.spot).pick(world.forwards.codes)[:, :, None]
    per_year = Curves(
        world.forwards.codes, world.forwards.tenors, (spot - world.forwards.values) / world.forwards.years
    )
    discounts, notes = rates_at(per_year, horizon, market, "forwards")
    panel = Panel(per_year.codes, discounts)
    discount = panel.pick(world.codes) * horizon_years(horizon, market.interval)
    return world.spot - discount, (*_absent("forwards", world, panel), *notes)


def _one_step(
    data: MarketData, world: Currencies, whole: tuple[Tenor, Floats], at: Window, *, by_rates: bool
) -> tuple[Floats | None, tuple[str, ...]]:
    """One-period excess returns (T, N) in the row of the period in which they fall, or None and why."""
    if any(table.source.timing == "average" for table in data.tables["spot"]):
        return None, ("spot rates are period averages, so one-period returns are no news; no one-period errors",)
    horizon, forward = whole
    price, spread_out = forward, np.zeros(len(world.codes), dtype=bool)
    if at.overlap:
        # Past the last whole horizon, too, the spread is earned over a whole horizon.
        steps = np.where(at.ends >= 0, at.ends - np.arange(len(at.ends)), at.overlap + 1)[:, None]
        price = _one_period_forward(data, world, by_rates=by_rates)
        spread_out = _stands(forward) & ~_stands(price)
        price = np.where(spread_out, world.spot - (world.spot - forward) / steps, price)
    outcomes = np.full_like(world.spot, np.nan)
    outcomes[1:] = world.spot[1:] - price[:-1]
    if not spread_out.any():
        return outcomes, ()
    codes = shown(code for code, own in zip(world.codes, spread_out, strict=True) if own)
    whose = f" ({codes})" if (_stands(forward) & ~spread_out).any() else ""
    note = f"one-period excess returns take the {horizon} spread in equal parts, as no one-period rate is quoted{whose}"
    return outcomes, (note,)


def _stands(values: Floats) -> np.typing.NDArray[np.bool_]:
    """Which currencies (N,) have any value."""
    return np.asarray(np.isfinite(values).any(axis=0))


def _one_period_forward(data: MarketData, world: Currencies, *, by_rates: bool) -> Floats:
    """Log forward price of one period (T, N), a hole where neither the currency nor home quotes that length."""
    step, quoted = step_tenor(data.calendar), world.rates if by_rates else world.forwards
    same = None if step is None or quoted is None else same_length(quoted, step.years)
    panel = None if same is None or quoted is None else quoted.at(same)
    if same is None or panel is None:
        return np.full_like(world.spot, np.nan)
    if by_rates:
        return world.spot - same.years * _differential(panel, world, str(data.market.home))
    return panel.pick(world.codes)


def _differential(rates: Panel, world: Currencies, home: str) -> Floats:
    """Foreign less home rates per year (T, N)."""
    return rates.pick(world.codes) - rates.column(home)[:, None]
