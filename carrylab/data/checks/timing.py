"""Checks on when a series was observed: other days, a period late, or averages of the period."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

import numpy as np

from carrylab.data.calendar import MONTHS_IN, Floats
from carrylab.data.checks.finding import Check, Dense, merged
from carrylab.data.checks.limits import (
    AVERAGE_AUTOCORRELATION,
    ENOUGH,
    ENOUGH_CHANGES,
    LAST_DAYS,
    LAST_SHARE,
    MISALIGNED_DAYS,
    WORKING,
)
from carrylab.data.read import MarketData

FEW = 12  # pairs of changes for a correlation


def alignment(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """D4: series observed on other days of the period than the rest, too early in it, or a period late or early."""
    ages = [_ages(one) for one in tables]
    known = np.concatenate([age[np.isfinite(age)] for age in ages]) if ages else np.empty(0)
    usual = float(np.median(known)) if len(known) else 0.0
    for one, age in zip(tables, ages, strict=True):
        apart = np.abs(age - usual) > MISALIGNED_DAYS
        for at in np.flatnonzero(apart):
            seen = f"usually observed {age[at]:.0f} days before the period's end, other series {usual:.0f}"
            yield one.found(("D4", "warning"), int(at), one.span(int(at)), (seen, "take all series on the same days"))
        yield from _early(one, apart)
    yield from _shifted(tables)


def _ages(one: Dense) -> Floats:
    """Median days from observation to the period's end, series by series."""
    left = (one.calendar.days[:, None] - one.days).astype(np.float64)
    left[np.isnat(one.days)] = np.nan
    return np.array([np.nanmedian(column) if np.isfinite(column).any() else np.nan for column in left.T])


def _early(one: Dense, said: np.typing.NDArray[np.bool_]) -> Iterator[Check]:
    """Prices declared as of the end of the period that are seldom from its last business days."""
    if one.calendar.interval not in MONTHS_IN or one.table.source.timing == "average":
        return
    shares = np.array([_last_days(days[~np.isnat(days)], one.calendar.days[~np.isnat(days)]) for days in one.days.T])
    wrong = (shares < LAST_SHARE) & ~said
    advice = 'take the last quotes of the period; dates at its start often mean averages: timing = "average"'
    if wrong.all() and len(wrong) > 1:
        seen = f"{np.median(shares):.0%} of observations are from the last {LAST_DAYS} business days of a period"
        yield one.whole(("D4", "warning"), (seen, advice))
        return
    for at in np.flatnonzero(wrong):
        seen = f"{shares[at]:.0%} of observations are from the last {LAST_DAYS} business days of a period"
        yield one.found(("D4", "warning"), int(at), one.span(int(at)), (seen, advice))


def _last_days(days: np.typing.NDArray[np.datetime64], ends: np.typing.NDArray[np.datetime64]) -> float:
    """Share of days in the last business days before `ends`; 1 where there are too few to say."""
    if len(days) < ENOUGH:
        return 1.0
    return float((np.busday_count(days, ends + 1) <= LAST_DAYS).mean())


def _shifted(tables: Sequence[Dense]) -> Iterator[Check]:
    """A price whose changes go with its peers' (or its own index') of the period before or after."""
    index = next((one for one in tables if one.role == "prices"), None)
    for one in tables:
        if not one.is_price() or one.role == "forwards":
            continue
        changes = _oriented(one)
        for at, label in enumerate(one.labels):
            if one.role == "total_return" and index is not None and label in index.labels:
                peers = _oriented(index)[:, index.labels.index(label)]
            elif len(one.labels) >= 4:
                peers = _peers(changes, at)
            else:
                continue
            late = _lag(changes[:, at], peers)
            if late:
                seen = f"changes go with those of its peers one period {'earlier' if late > 0 else 'later'}"
                advice = f"the dates look one period {'late' if late > 0 else 'early'}"
                yield one.found(("D4", "warning"), at, one.span(at), (seen, advice))


def _peers(changes: Floats, at: int) -> Floats:
    """Mean change of the other series, where three stand."""
    others = np.delete(changes, at, axis=1)
    enough = np.isfinite(others).sum(axis=1) >= 3
    mean = np.full(len(others), np.nan)
    mean[enough] = np.nanmean(others[enough], axis=1)
    return mean


def _oriented(one: Dense) -> Floats:
    """Changes with the sign that makes most of them move with the first principal direction of the table."""
    changes = one.changes()
    filled = np.nan_to_num(changes - np.nanmean(np.where(np.isfinite(changes), changes, 0.0), axis=0))
    scale = filled.std(axis=0)
    leading = np.linalg.svd(filled / np.where(scale > 0, scale, 1.0), full_matrices=False)[2][0]
    return changes * np.where(leading < 0, -1.0, 1.0)


def _lag(own: Floats, peers: Floats) -> int:
    """+1 or -1 where the correlation is clearly largest at that lag, else 0."""
    n = int((np.isfinite(own) & np.isfinite(peers)).sum())
    if n < ENOUGH:
        return 0
    # Sizes only: the sign of a series that is out of step with its peers cannot be told from them.
    same, late, early = (
        abs(_correlation(*pair)) for pair in ((own, peers), (own[1:], peers[:-1]), (own[:-1], peers[1:]))
    )
    margin = 3.0 / math.sqrt(n)
    if late > max(same, early) + margin:
        return 1
    return -1 if early > max(same, late) + margin else 0


def _correlation(a: Floats, b: Floats) -> float:
    both = np.isfinite(a) & np.isfinite(b)
    if both.sum() < FEW or a[both].std() == 0 or b[both].std() == 0:
        return 0.0
    return float(np.corrcoef(a[both], b[both])[0, 1])


def averages(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """D5: whether the changes of a price follow on from the last ones, the mark of averages (Working 1960)."""
    for one in tables:
        if not one.is_price():
            continue
        declared = one.table.source.timing == "average"
        for at, column in enumerate(one.changes().T):
            n = int(np.isfinite(column).sum())
            own = _correlation(column[1:], column[:-1])
            seen = f"changes have autocorrelation {own:.2f} (averages have about .25)"
            if n < ENOUGH_CHANGES:
                continue
            if not declared and own > max(AVERAGE_AUTOCORRELATION, 2.0 / math.sqrt(n)):
                advice = 'a monthly average? then declare timing = "average"'
                yield one.found(("D5", "warning"), at, one.span(at), (seen, advice))
            elif declared and own < WORKING - 3.0 / math.sqrt(n):
                advice = 'declared an average, but looks like the end of the period: timing = "end"?'
                yield one.found(("D5", "note"), at, one.span(at), (seen, advice))


TIMING = {"D4": lambda data, tables: merged(alignment(data, tables)), "D5": averages}
