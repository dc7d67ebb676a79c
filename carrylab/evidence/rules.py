"""States by rule: a series against its own level, by what was known at each date."""

from __future__ import annotations

import bisect
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from carrylab.errors import StudyError
from carrylab.evidence.case import Case
from carrylab.evidence.setting import Fit
from carrylab.options import Rule, State
from carrylab.regression.sample import Floats
from carrylab.schema import nearest

Labels = npt.NDArray[np.object_]
A_YEAR = {"day": 252, "week": 52, "month": 12, "quarter": 4, "year": 3}  # periods of trailing volatility
LEAST = 20  # values before a level of the past counts as known
VOLATILITY = "volatility"


def rule_labels(state: State, rule: Rule, fit: Fit, terms: Floats) -> Labels | None:
    """Label of every date (T,), empty where the series or its level is not known; None where there is no such series.

    The series is the mean over entities of the signal or of an added predictor (`terms`, (T, N, K)), or the trailing
    volatility of the mean one-period excess return over a year. A mean or quantile is that of all values up to and
    including the date, or of the whole sample where the state is declared as not known at the time.
    """
    values = _series(rule, fit, terms)
    if values is None:
        return None
    level = _level(values, rule, known=state.known)
    stands = np.isfinite(values) & np.isfinite(level)
    inside = values > level if rule.side == "above" else values < level
    labels = np.where(inside, state.name, f"not {state.name}").astype(object)
    labels[~stands] = ""
    return labels


def require_found(states: Sequence[State], cases: Sequence[Case]) -> None:
    """StudyError for a rule whose series no market has."""
    found = {state.name for case in cases for state in case.states}
    known = dict.fromkeys(name for case in cases for name in (*case.pooled.sample.terms, VOLATILITY))
    for state in states:
        if state.rule is not None and state.name not in found:
            raise StudyError(
                f"[[state]] {state.name!r}, key rule: no market has the series {state.rule.series!r}"
                f"{nearest(state.rule.series, known)}; allowed are {', '.join(known)}, the last where there are excess "
                "returns of single periods"
            )


def _series(rule: Rule, fit: Fit, terms: Floats) -> Floats | None:
    if rule.series in fit.sample.terms:
        return _mean(terms[:, :, fit.sample.terms.index(rule.series)])
    at = fit.leg_of("return")
    outcome = None if at is None else fit.parity.legs[at].one_step
    if rule.series != VOLATILITY or outcome is None or outcome.ndim != 2:
        return None
    return _volatility(outcome, A_YEAR[fit.parity.calendar.interval])


def _mean(values: Floats) -> Floats:
    """Mean over the entities that stand (T,), NaN where none does."""
    stands = np.isfinite(values)
    count = stands.sum(axis=1)
    total = np.where(stands, values, 0.0).sum(axis=1)
    mean: Floats = np.divide(total, count, out=np.full(len(values), np.nan), where=count > 0)
    return mean


def _volatility(outcome: Floats, length: int) -> Floats:
    """Standard deviation of the mean one-period excess return over the year that ends at each date (T,)."""
    returns = _mean(outcome)
    found = np.full(len(returns), np.nan)
    if len(returns) >= length:
        found[length - 1 :] = np.lib.stride_tricks.sliding_window_view(returns, length).std(axis=1, ddof=1)
    return found


def _level(values: Floats, rule: Rule, *, known: bool) -> Floats:
    """What the series is held against at each date (T,)."""
    if rule.mark == "zero":
        return np.zeros(len(values))
    if not known:
        stands = values[np.isfinite(values)]
        whole = stands.mean() if rule.mark == "mean" else np.quantile(stands, rule.mark)
        return np.full(len(values), whole)
    return _running(values, rule.mark)


def _running(values: Floats, mark: str | float) -> Floats:
    """Mean or quantile of everything up to and including each date, NaN before `LEAST` values."""
    level, seen = np.full(len(values), np.nan), list[float]()
    for t, value in enumerate(values):
        if np.isfinite(value):
            bisect.insort(seen, float(value))
        if len(seen) >= LEAST:
            level[t] = np.mean(seen) if isinstance(mark, str) else _quantile(seen, mark)
    return level


def _quantile(ordered: list[float], part: float) -> float:
    """Linear interpolation between the ordered values."""
    place = part * (len(ordered) - 1)
    low = int(place)
    high = min(low + 1, len(ordered) - 1)
    return ordered[low] + (place - low) * (ordered[high] - ordered[low])
