"""Checks on equity indices: what price, dividends and total return say of each other."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from carrylab.data.calendar import Floats
from carrylab.data.checks.finding import Check, Dense, span_of
from carrylab.data.checks.limits import NEGATIVE_SHARE, ROUNDING, YIELDS
from carrylab.data.read import MarketData


def dividends(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """Q1: implied dividends below zero, yields out of range, or a total return that falls behind the price."""
    prices = {label: one.values[:, at] for one in tables if one.role == "prices" for at, label in enumerate(one.labels)}
    for one in tables:
        for at, label in enumerate(one.labels):
            if label not in prices:
                continue
            if one.role == "dividends":
                yield from _yield(one, at, prices[label])
            elif one.role == "total_return":
                yield from _implied(one, at, prices[label])


def _yield(one: Dense, at: int, price: Floats) -> Iterator[Check]:
    scale = 1.0 if one.table.source.basis == "trailing 12 months" else 12.0
    ratio = scale * one.values[:, at] / price
    known = ratio[np.isfinite(ratio)]
    if not len(known):
        return
    middle = float(np.median(known))
    if not YIELDS[0] < middle < YIELDS[1]:
        seen = f"median dividend yield {middle:.3%}, outside {YIELDS[0]:.1%} to {YIELDS[1]:.0%}"
        yield one.found(("Q1", "warning"), at, span_of(ratio), (seen, "check the unit and basis of the dividends"))


def _implied(one: Dense, at: int, price: Floats) -> Iterator[Check]:
    total = one.values[:, at]
    excess = total[1:] / total[:-1] - price[1:] / price[:-1]
    known = excess[np.isfinite(excess)]
    if len(known) < 12:
        return
    ratio = total / price
    ends = ratio[np.isfinite(ratio)][[0, -1]]
    if ends[1] < ends[0]:
        seen = f"total return over price falls from {ends[0]:.3g} to {ends[1]:.3g}"
        advice = "price and total return may stand in each other's place"
        yield one.found(("Q1", "warning"), at, span_of(ratio), (seen, advice))
    elif (known < -ROUNDING).mean() > NEGATIVE_SHARE:
        seen = f"implied dividends are below zero in {(known < -ROUNDING).mean():.0%} of periods"
        advice = "other dates, or net against gross; check that both indices stand on the same days"
        yield one.found(("Q1", "warning"), at, span_of(ratio), (seen, advice))


EQUITIES = {"Q1": dividends}
