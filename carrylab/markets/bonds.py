"""Zero-coupon bonds: four yield parities and carry.

p(n) = -n y(n) is the log price of the n-year bond, h or m the holding period in years. Each leg is computed from
prices on its own.
forward-spot (Fama and Bliss 1987, AER 77:680): p_t(n-h) - p_t(n) - h y_t(h) = excess return + rise of the (n-h) rate.
forward-spot-far: the same forward rate against the k-year rate n-k years ahead, and against the return held so long.
yield-spread (Campbell and Shiller 1991, REStud 58:495): m/(n-m) [y_t(n) - y_t(m)] = long-yield rise + return/(n-m).
yield-spread-to-maturity (the same paper): y_t(n) - y_t(m) = average future m-rate less today's + average return.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from carrylab.data.calendar import MONTHS_IN, Floats, Tenor, Window, lead, steps_in
from carrylab.data.panel import curves
from carrylab.data.read import MarketData
from carrylab.errors import DataError, StudyError
from carrylab.markets.curves import YieldCurves
from carrylab.markets.holding import Bonds, ahead, in_study, one_period_returns
from carrylab.markets.parity import Entity, Leg, Parity
from carrylab.markets.tenors import SAME

CARRY_NOTE = "for a zero-coupon bond the return on an unchanged curve is the forward-spot spread"


@dataclass(frozen=True, eq=False, slots=True)
class Built:
    """Signal and legs (T, N) of one maturity; `note` says why it has no one-period returns."""

    signal: Floats
    legs: tuple[Leg, ...]
    note: str = ""


def parities(data: MarketData, economies: Mapping[str, str]) -> list[Parity]:
    """Every bond parity of the study: one a horizon, and one a maturity for the two distant ones.

    Raises StudyError for a maturity or horizon that cannot be, DataError for a maturity that no rule gives an economy.
    """
    quoted = curves(data.tables["zero_yields"], data.calendar, "economy", "maturity")
    bonds = Bonds(data, YieldCurves(quoted, data.market), economies)
    found = []
    for name in data.market.parities:
        if name in DISTANT:
            found += _distant(bonds, name)
        else:
            found += [_near(bonds, name, horizon) for horizon in data.market.horizons]
    return found


def _maturities(bonds: Bonds, above: Tenor) -> tuple[Tenor, ...]:
    """The maturities of the study, or all quoted ones, longer than the holding period."""
    market = bonds.data.market
    listed = market.maturities or bonds.curves.quoted.tenors
    longer = tuple(n for n in listed if n.years > above.years + SAME)
    short = [str(n) for n in market.maturities if n not in longer]
    if short or not longer:
        seen = f"{short[0]!r} is" if short else f"of {', '.join(map(str, listed))} none is"
        raise StudyError(
            f"market {market.name!r}, key maturities: {seen} not longer than {above}; allowed are longer maturities, "
            "as the bond must live on when the holding period ends"
        )
    return longer


def _near(bonds: Bonds, name: str, h: Tenor) -> Parity:
    _refuse_trading_days(bonds, "horizons", h)
    maturities = _maturities(bonds, h)
    at = bonds.window(h)
    bonds.curves.clear()
    built = [_all_there(bonds, n, NEAR[name](bonds, n, h, at)) for n in maturities]
    return _parity(bonds, (name, h, at), maturities, built)


def _distant(bonds: Bonds, name: str) -> list[Parity]:
    """One parity a maturity n, its horizon n less `short`."""
    short = bonds.data.market.short
    if short is None:
        raise StudyError(
            f'market {bonds.data.market.name!r}: the key short is missing; {name} needs it, such as short = "12m"'
        )
    _refuse_trading_days(bonds, "short", short)
    found = []
    for n in _maturities(bonds, short):
        _require_whole(bonds, name, n, short)
        horizon = n - short
        bonds.curves.clear()
        built = _all_there(bonds, n, DISTANT[name](bonds, n, short))
        found.append(_parity(bonds, (name, horizon, bonds.window(horizon)), (n,), [built]))
    return found


def _all_there(bonds: Bonds, n: Tenor, built: Built) -> Built:
    """What was built of the n-bond, if no economy lacks a maturity it needs."""
    lacking = in_study(bonds, n, bonds.curves.lacking)
    if lacking:
        others = set(in_study(bonds, n, bonds.curves.quoted.codes)) - set(lacking)
        raise DataError(bonds.curves.missing(lacking, [f"{code} {n}" for code in lacking if others]))
    bonds.curves.lacking.clear()
    return built


def _refuse_trading_days(bonds: Bonds, key: str, length: Tenor) -> None:
    if bonds.calendar.interval == "day" and steps_in(length, "day") is not None:
        raise StudyError(
            f"market {bonds.data.market.name!r}, key {key}: {str(length)!r} counts trading days, in which no maturity "
            "is quoted; allowed for bonds are months, such as 1m, and weeks"
        )


def _require_whole(bonds: Bonds, name: str, n: Tenor, short: Tenor) -> None:
    """The horizon n less `short` must be whole periods; to maturity n is a multiple of `short`, and that whole."""
    market, interval = bonds.data.market, bonds.calendar.interval
    place = f"market {market.name!r}, key maturities: {str(n)!r}"
    rolls = name == "yield-spread-to-maturity"
    if rolls and n != short.times(round(n.years / short.years)):
        raise StudyError(f"{place} is no whole number of {short}; allowed with {name} are multiples of short")
    step = short if rolls else n - short
    if interval in MONTHS_IN and steps_in(step, interval) is None:
        raise StudyError(f"{place} with short = {short}: {step} is no whole number of {interval}s, as {name} needs")


def _parity(bonds: Bonds, what: tuple[str, Tenor, Window], maturities: tuple[Tenor, ...], built: list[Built]) -> Parity:
    """Stack the maturities side by side: entities are economy by maturity."""
    name, horizon, at = what
    codes = bonds.curves.quoted.codes
    notes = [CARRY_NOTE] if name == "carry" else []
    if bonds.curves.used:
        notes.append(
            f"maturities not quoted ({bonds.curves.filled()}) are filled: {bonds.data.market.missing_maturity}"
        )
    notes += dict.fromkeys(part.note for part in built if part.note)
    return Parity(
        market=bonds.data.market.name,
        name=name,
        horizon=horizon,
        calendar=bonds.calendar,
        window=at,
        entities=tuple(
            Entity(f"{code} {n}", code, bonds.economies.get(code, ""), str(n)) for n in maturities for code in codes
        ),
        signal_name=SIGNALS[name],
        signal=np.concatenate([part.signal for part in built], axis=1),
        legs=tuple(_side_by_side([part.legs[at_leg] for part in built]) for at_leg in range(len(built[0].legs))),
        notes=tuple(notes),
    )


def _side_by_side(legs: list[Leg]) -> Leg:
    first = legs[0]
    steps = [leg.one_step for leg in legs if leg.one_step is not None]
    one_step = np.concatenate(steps, axis=1) if len(steps) == len(legs) else None
    values = np.concatenate([leg.values for leg in legs], axis=1)
    return Leg(first.name, first.role, values, first.weight, first.null, one_step)


def forward_spot(bonds: Bonds, n: Tenor, h: Tenor, at: Window) -> Built:
    """Forward-spot spread against the h-period return and the rise of the (n-h) rate."""
    price, rest = bonds.curves.price, n - h
    riskless = h.years * bonds.curves.yields(h)
    later = lead(bonds.curves.yields(rest), at)
    excess = -rest.years * later - price(n) - riskless
    rise = rest.years * (later - bonds.curves.yields(rest))
    steps = one_period_returns(bonds, n, h)
    return Built(
        price(rest) - price(n) - riskless,
        (
            Leg("excess return", "return", excess, 1.0, 0.0, steps.values),
            Leg("rate rise", "fundamental", rise, 1.0, 1.0, steps.times(-1.0)),
        ),
        steps.note,
    )


def carry(bonds: Bonds, n: Tenor, h: Tenor, at: Window) -> Built:
    """Return on an unchanged curve against the return and the price change beyond it (weight -1)."""
    found = forward_spot(bonds, n, h, at)
    rest = n - h
    change = lead(bonds.curves.price(rest), at) - bonds.curves.price(rest)
    excess = found.legs[0]
    return Built(
        found.signal,
        (excess, Leg("price change beyond the carry", "fundamental", change, -1.0, -1.0, excess.one_step)),
        found.note,
    )


def yield_spread(bonds: Bonds, n: Tenor, m: Tenor, at: Window) -> Built:
    """Scaled yield spread against the rise of the long yield and the return per year of life left."""
    rest = n - m
    scale = m.years / rest.years
    later = lead(bonds.curves.yields(rest), at)
    excess = -rest.years * later - bonds.curves.price(n) - m.years * bonds.curves.yields(m)
    steps = one_period_returns(bonds, n, m)
    return Built(
        scale * (bonds.curves.yields(n) - bonds.curves.yields(m)),
        (
            Leg("excess return", "return", excess / rest.years, 1.0, 0.0, steps.times(1 / rest.years)),
            Leg(
                "long-rate rise", "fundamental", later - bonds.curves.yields(n), 1.0, 1.0, steps.times(-1 / rest.years)
            ),
        ),
        steps.note,
    )


def forward_spot_far(bonds: Bonds, n: Tenor, k: Tenor) -> Built:
    """Forward-spot spread against the k-year rate n-k years ahead; the return is held as long."""
    price, rest = bonds.curves.price, n - k
    at = bonds.window(rest)
    later = lead(bonds.curves.yields(k), at)
    excess = -k.years * later - price(n) - rest.years * bonds.curves.yields(rest)
    rise = k.years * (later - bonds.curves.yields(k))
    steps = one_period_returns(bonds, n, rest)
    return Built(
        price(rest) - price(n) - k.years * bonds.curves.yields(k),
        (
            Leg("excess return", "return", excess, 1.0, 0.0, steps.values),
            Leg("rate rise", "fundamental", rise, 1.0, 1.0, steps.times(-1.0)),
        ),
        steps.note,
    )


def yield_spread_to_maturity(bonds: Bonds, n: Tenor, m: Tenor) -> Built:
    """Yield spread against the average of future m-rates and the average return over rolling m-bonds."""
    k = round(n.years / m.years)
    short = bonds.curves.yields(m)
    average = np.zeros_like(short)
    returns = np.zeros_like(short)
    for i in range(k):
        average = average + ahead(bonds, short, m.times(i)) / k
        if i < k - 1:
            left = n - m.times(i)
            sold = ahead(bonds, bonds.curves.price(left - m), m.times(i + 1))
            bought = ahead(bonds, bonds.curves.price(left), m.times(i))
            returns = returns + (sold - bought - m.years * ahead(bonds, short, m.times(i))) / n.years
    steps = one_period_returns(bonds, n, m, rolls=k - 1)
    return Built(
        bonds.curves.yields(n) - short,
        (
            Leg("average excess return", "return", returns, 1.0, 0.0, steps.times(1 / n.years)),
            Leg("average short-rate rise", "fundamental", average - short, 1.0, 1.0, steps.times(-1 / n.years)),
        ),
        steps.note,
    )


NEAR: Mapping[str, Callable[[Bonds, Tenor, Tenor, Window], Built]] = MappingProxyType(
    {"forward-spot": forward_spot, "yield-spread": yield_spread, "carry": carry}
)
DISTANT: Mapping[str, Callable[[Bonds, Tenor, Tenor], Built]] = MappingProxyType(
    {"forward-spot-far": forward_spot_far, "yield-spread-to-maturity": yield_spread_to_maturity}
)
SIGNALS: Mapping[str, str] = MappingProxyType(
    {
        "forward-spot": "forward-spot spread",
        "forward-spot-far": "forward-spot spread",
        "yield-spread": "yield spread",
        "yield-spread-to-maturity": "yield spread",
        "carry": "carry (forward-spot spread)",
    }
)
