"""Findings of an invented study, written out as the routines would: three markets, two parities, carry shared."""

from __future__ import annotations

import itertools
import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import pandas as pd

from carrylab.findings import to_frame

Row = dict[str, Any]
ONE_PERIOD = "entity effects; one-period errors, normal"
COSINES = "entity effects; equal-weighted cosines, 19 cosines, t with 19 degrees of freedom"


@dataclass(frozen=True)
class Legs:
    """Legs of one parity: name -> (role, weight, null, slope in a pooled fit, its error, R2)."""

    signal: str
    legs: Mapping[str, tuple[str, float, float, float, float, float]]
    mean: float


@dataclass(frozen=True)
class Place:
    """Where a column of findings stands."""

    market: str
    parity: str
    horizon: str = "12m"
    interval: str = "month"
    first: str = "1996-01"
    last: str = "2024-12"


BONDS = Legs(
    "forward-spot spread",
    {
        "excess return": ("return", 1, 0, 0.834, 0.214, 0.1349),
        "rate rise": ("fundamental", 1, 1, 0.166, 0.214, 0.0091),
    },
    mean=0.0121,
)
CURRENCIES = Legs(
    "rate differential",
    {
        "excess return": ("return", 1, 0, 1.62, 0.45, 0.0593),
        "foreign appreciation": ("fundamental", -1, -1, 0.62, 0.45, 0.0052),
    },
    mean=0.0092,
)
EQUITIES = Legs(
    "log dividend-price ratio",
    {
        "excess return": ("return", 1, 0, 0.286, 0.077, 0.2102),
        "riskless rate": ("fundamental", 1, math.nan, -0.033, 0.012, 0.1145),
        "dividend growth": ("fundamental", -1, math.nan, 0.031, 0.013, 0.0408),
        "future dividend-price ratio": ("carried over", 0.968, math.nan, 0.8256, 0.056, 0.6666),
        "approximation": ("approximation", 1, math.nan, -0.0092, 0.0015, 0.2532),
    },
    mean=-3.408,
)
EQUITY_CARRY = Legs(
    "carry (dividend yield over the bill rate)",
    {
        "excess return": ("return", 1, 0, 1.38, 0.69, 0.0681),
        "price change beyond the carry": ("fundamental", -1, -1, 0.38, 0.69, 0.0042),
    },
    mean=-0.0011,
)


def three_markets() -> pd.DataFrame:
    """Bonds, currencies and equities at twelve months, with carry in all three and both joint tests."""
    rows = [
        *column(Place("Sovereign bonds", "forward-spot"), BONDS, groups=("2y", "10y")),
        *column(Place("Sovereign bonds", "carry"), BONDS),
        *column(Place("Currencies", "uncovered-interest"), CURRENCIES, groups=("QNK", "QPD")),
        *column(Place("Currencies", "carry"), CURRENCIES),
        *column(Place("Equity indices", "dividend-price"), EQUITIES, groups=("QM",)),
        *column(Place("Equity indices", "carry"), EQUITY_CARRY),
    ]
    names = ("Sovereign bonds", "Currencies", "Equity indices")
    for what in ("each market's own spread", "carry"):
        rows += joint(what, names)
    return to_frame([*rows, *accounts()])


def column(place: Place, legs: Legs, *, groups: tuple[str, ...] = ()) -> list[Row]:
    """All rows of one market, parity and horizon; groups differ from the pooled fit by a stated step."""
    rows: list[Row] = []
    for number, group in enumerate(("pooled", *groups)):
        rows += _shares(place, legs, group, 0.11 * number)
    return [*rows, *_summary(place, legs), *_latest(place, legs), _identity(place)]


def _at(place: Place, section: str, **more: object) -> Row:
    found = {"section": section, "market": place.market, "parity": place.parity, "horizon": place.horizon}
    counts = {"n_dates": 348, "n_entities": 10, "n_obs": 3210}
    return (
        found
        | {"interval": place.interval, "sample": "all", "first": place.first, "last": place.last}
        | (counts if section in ("shares", "summary") else {})
        | more
    )


def _shares(place: Place, legs: Legs, group: str, step: float) -> list[Row]:
    rows: list[Row] = []
    paid = 0.0
    for name, (role, weight, null, slope, error, r2) in legs.legs.items():
        at = _at(place, "shares", rank="headline", group=group, leg=name, role=role)
        method = ONE_PERIOD if role == "return" else COSINES
        if role in ("return", "fundamental") and not math.isnan(null):
            slope += step if role == "return" else -step * weight
        share = weight * slope
        paid = share if role == "return" else paid
        numbers = {"estimate": slope, "std_error": error, "null": null, "weight": weight, "share": share, "r2": r2}
        p = 2 * (1 - _normal(abs(slope - null) / error)) if not math.isnan(null) else None
        rows.append(at | numbers | {"term": "signal", "p_value": p, "method": method})
        rows.append(at | {"term": "const", "estimate": 0.004, "std_error": 0.01, "method": method})
        if role == "return":
            rows.append(at | {"term": "nothing paid", "estimate": slope, "p_value": p, "method": method})
            second = {"rank": "second opinion", "p_value": None if p is None else min(1.0, 1.5 * p + 0.01)}
            rows.append(rows[-1] | second | {"method": "entity effects; instrument, normal"})
    whole = _at(place, "shares", rank="headline", group=group, method=COSINES)
    rows.append(whole | {"term": "sum of shares", "estimate": 1.0, "method": ""})
    rows += [whole | _resolved(legs, paid), whole | _all_paid(legs)]
    return rows


def _resolved(legs: Legs, paid: float) -> Row:
    """Premium over all that is not carried over."""
    left = sum(weight * slope for role, weight, _, slope, _, _ in legs.legs.values() if role == "carried over")
    error = next(error for role, _, _, _, error, _ in legs.legs.values() if role == "return")
    row: Row = {"term": "resolved premium share", "estimate": paid / (1 - left), "std_error": error}
    return row | ({"lower": 1.12, "upper": 1.93, "note": "interval by inverting the restriction"} if left else {})


def _all_paid(legs: Legs) -> Row:
    parts = [
        (weight * slope, error) for role, weight, _, slope, error, _ in legs.legs.values() if role == "fundamental"
    ]
    error = math.sqrt(sum(error**2 for _, error in parts))
    share = sum(share for share, _ in parts)
    return {"term": "all paid", "estimate": share, "std_error": error, "p_value": 2 * (1 - _normal(abs(share) / error))}


def _normal(z: float) -> float:
    return 0.5 * (1 + math.erf(z / math.sqrt(2)))


def _summary(place: Place, legs: Legs) -> list[Row]:
    at = _at(place, "summary", group="pooled")
    numbers = {
        "signal sd within": 0.0152,
        "independent windows": 29.0,
        "effective entities": 3.7,
        "predicted size": 0.06,
    }
    return [
        at | {"term": "mean signal", "leg": legs.signal, "estimate": legs.mean, "std_error": 0.004},
        at | {"term": "mean excess return", "estimate": 0.0134, "std_error": 0.0119},
        at | {"term": "level share", "estimate": 0.0134 / legs.mean},
        *(at | {"term": term, "estimate": value} for term, value in numbers.items()),
    ]


def _latest(place: Place, legs: Legs) -> list[Row]:
    rows: list[Row] = []
    for entity, signal in (("QN", legs.mean), ("QP", 1.5 * legs.mean)):
        at = _at(place, "latest", group=entity, last="2025-12")
        rows += [
            at | {"term": "signal", "estimate": signal},
            at | {"term": "percentile", "estimate": 0.37},
            at | {"term": "fitted premium", "estimate": -0.0012, "lower": -0.031, "upper": 0.0286},
        ]
    return rows


def _identity(place: Place) -> Row:
    note = "largest at QN, 2001-11; tolerance 1e-10"
    return _at(place, "identity", group="pooled", term="largest gap", estimate=2.8e-17, n_obs=3210, note=note)


def joint(what: str, names: tuple[str, ...], horizon: str = "12m") -> list[Row]:
    """Differences of the resolved premium shares of neighbours, and the joint test."""
    at: Row = {"section": "joint", "parity": what, "horizon": horizon, "interval": "month", "group": "pooled"}
    at |= {"sample": "all"}
    pairs = itertools.pairwise(names)
    numbers = {"estimate": -0.786, "lower": -1.77, "upper": 0.2, "p_value": 0.1134}
    rows = [at | numbers | {"term": f"{a} less {b}", "method": "difference, 19 cosines"} for a, b in pairs]
    return [*rows, at | {"term": "all resolved premium shares equal", "p_value": 0.2104, "method": "F(2, 18)"}]


def accounts() -> list[Row]:
    """Ledger and checks."""
    reasons = {"read": 3330, "missing": 2, "duplicates": 1, "outside": 0, "superseded": 3, "used": 3324}
    ledger = {"section": "ledger", "market": "Currencies", "leg": "spot: fx_spot.csv", "group": "QNKQMT"}
    check = {"section": "check", "market": "Currencies", "leg": "fx_spot.csv", "term": "D3"}
    return [
        *(ledger | {"term": reason, "estimate": count} for reason, count in reasons.items()),
        check | {"rank": "warning", "sample": "1", "note": "warning D3 fx_spot.csv QNKQMT: unchanged for 3 months"},
        check | {"rank": "note", "sample": "2", "note": "note D8 fx_spot.csv QPDQMT: one large change"},
    ]
