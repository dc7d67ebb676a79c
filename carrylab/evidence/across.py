"""Across markets: are the resolved premium shares equal? Differences with intervals first, the joint p second."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.evidence.setting import Fit, Row, tested
from carrylab.evidence.shares import parity_shares
from carrylab.regression.longrun import cosine_count, longrun
from carrylab.regression.sample import Floats
from carrylab.regression.wald import restrictions, wald

DESCRIPTIVE = "descriptive: no theory implies equal shares"


@dataclass(frozen=True, eq=False, slots=True)
class Stack:
    """Resolved premium shares of several markets on one calendar: `values` (m,), `series` (T, m)."""

    names: tuple[str, ...]
    values: Floats
    series: Floats
    overlap: int


def across_rows(fits: Sequence[Fit], what: str) -> list[Row]:
    """Rows of section `joint` that compare pooled fits of one horizon and interval; `what` names the comparison.

    The overlap of the stack is the largest in it; cosines are capped by the dates that all share.
    """
    if len(fits) < 2:
        return []
    stack = _stack(fits)
    place = {
        "section": "joint",
        "parity": what,
        "horizon": str(fits[0].parity.horizon),
        "interval": fits[0].parity.calendar.interval,
        "group": "pooled",
        "sample": "all",
    }
    rows = [_difference(stack, pair, fits[0].confidence) for pair in itertools.combinations(range(len(fits)), 2)]
    if len(fits) > 2:
        rows.append(_all_equal(stack))
    return [place | row for row in rows]


def _stack(fits: Sequence[Fit]) -> Stack:
    numbers = np.unique(np.concatenate([fit.parity.calendar.ordinals for fit in fits]))
    series = np.zeros((len(numbers), len(fits)))
    values = np.zeros(len(fits))
    for column, fit in enumerate(fits):
        resolved = parity_shares(fit).resolved
        values[column] = resolved.value
        series[np.searchsorted(numbers, fit.parity.calendar.ordinals), column] = resolved.series
    names = tuple(fit.parity.market for fit in fits)
    return Stack(names, values, series, max(fit.sample.overlap for fit in fits))


def _cosines(stack: Stack, columns: Sequence[int]) -> int:
    """As many cosines as the dates on which all these markets stand allow."""
    together = (stack.series[:, list(columns)] != 0).all(axis=1)
    return cosine_count(int(together.sum()), stack.overlap)


def _difference(stack: Stack, pair: tuple[int, int], confidence: float) -> Row:
    first, second = pair
    run = longrun(stack.series[:, [first]] - stack.series[:, [second]], "cosine", cosines=_cosines(stack, pair))
    gap = float(stack.values[first] - stack.values[second])
    return {
        "term": f"{stack.names[first]} less {stack.names[second]}",
        **tested(gap, math.sqrt(float(run.covariance[0, 0])), 0.0, run.df, confidence),
        "lags": run.cosines,
        "method": f"difference of resolved premium shares, equal-weighted cosines, {run.cosines} cosines",
        "note": DESCRIPTIVE,
    }


def _all_equal(stack: Stack) -> Row:
    count = len(stack.names)
    matrix = np.hstack([np.ones((count - 1, 1)), -np.eye(count - 1)])
    names = [f"{stack.names[0]} = {other}" for other in stack.names[1:]]
    cosines = _cosines(stack, range(count))
    found = wald(stack.series, stack.values, restrictions(names, matrix), kind="cosine", cosines=cosines)
    return {
        "term": "all resolved premium shares equal",
        "statistic": found.statistic,
        "df": found.df_denominator,
        "p_value": found.p_value,
        "lags": found.cosines,
        "method": f"{found.law} from {found.cosines} cosines, overlap {stack.overlap}",
        "note": DESCRIPTIVE,
    }
