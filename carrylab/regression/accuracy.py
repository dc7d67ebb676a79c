"""How good forecasts were: out-of-sample R2, Clark-West, encompassing, and what an investor would have gained."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.law import upper_tail
from carrylab.regression.longrun import cosine_count, longrun
from carrylab.regression.sample import Floats


@dataclass(frozen=True, slots=True)
class OneSided:
    """A mean or slope with its error by cosines, and the p-value against a larger value."""

    value: float
    std_error: float
    statistic: float
    p_value: float
    df: float


def r2_out_of_sample(actual: Floats, model: Floats, benchmark: Floats) -> float:
    """1 - sum (Y - F2)^2 / sum (Y - F1)^2 over the cells where all three stand (Campbell and Thompson 2008, eq. 4).

    >>> r2_out_of_sample(np.array([1.0, 3.0]), np.array([1.0, 2.0]), np.array([2.0, 2.0]))
    0.5
    """
    stands = np.isfinite(actual + model + benchmark)
    errors, others = (actual - model)[stands], (actual - benchmark)[stands]
    return 1.0 - float(errors @ errors) / float(others @ others)


def by_date(values: Floats) -> Floats:
    """Mean over the entities that stand (T,), NaN where none does."""
    stands = np.isfinite(values)
    count = stands.sum(axis=1)
    total = np.where(stands, values, 0.0).sum(axis=1)
    mean: Floats = np.divide(total, count, out=np.full(len(values), np.nan), where=count > 0)
    return mean


def clark_west(actual: Floats, model: Floats, benchmark: Floats, overlap: int) -> OneSided:
    """Whether the larger of two nested models forecasts better, one-sided.

    f = (Y - F1)^2 - [(Y - F2)^2 - (F1 - F2)^2], the mean over entities at each origin; its mean over origins is zero
    where the smaller model is true. Errors by equal-weighted cosines, .4 P^(2/3) and at most P/h of them, Student's t.
    Source: Clark and West (2007, J. Econometrics 138:291); cosines under overlap are our choice.
    """
    adjusted = (actual - benchmark) ** 2 - ((actual - model) ** 2 - (benchmark - model) ** 2)
    return mean_above_zero(by_date(adjusted), overlap)


def mean_above_zero(series: Floats, overlap: int) -> OneSided:
    """Mean of a series (T,) with holes, tested against zero from above."""
    stands = np.isfinite(series)
    count = int(stands.sum())
    if count <= 2 * (overlap + 1):
        raise InferenceError(f"{count} forecasts of {overlap + 1} periods each are too few to test; start earlier")
    mean = float(series[stands].mean())
    influence = np.where(stands, series - mean, 0.0)[:, None] / count
    run = longrun(influence, "cosine", cosines=cosine_count(count, overlap))
    error = math.sqrt(float(run.covariance[0, 0]))
    statistic = mean / error if error > 0 else math.nan
    return OneSided(mean, error, statistic, float(upper_tail(statistic, run.df)), run.df)


def encompassing(actual: Floats, model: Floats, benchmark: Floats, overlap: int) -> OneSided:
    """Weight on the model when both forecasts are combined: slope of Y - F1 on F2 - F1 without a constant.

    Zero: the model adds nothing. One: the benchmark adds nothing to it. One-sided against a positive weight, by
    cosines. Source: Harvey, Leybourne and Newbold (1998, JBES 16:254) in regression form; the panel sum is our own.
    """
    stands = np.isfinite(actual + model + benchmark)
    gap = np.where(stands, model - benchmark, 0.0)
    missed = np.where(stands, actual - benchmark, 0.0)
    total = float((gap**2).sum())
    if not total > 0:
        raise InferenceError("model and benchmark never differ, so there is no weight to estimate")
    weight = float((gap * missed).sum()) / total
    scores = (gap * (missed - weight * gap)).sum(axis=1, keepdims=True) / total
    run = longrun(scores, "cosine", cosines=cosine_count(int(stands.any(axis=1).sum()), overlap))
    error = math.sqrt(float(run.covariance[0, 0]))
    statistic = weight / error if error > 0 else math.nan
    return OneSided(weight, error, statistic, float(upper_tail(statistic, run.df)), run.df)


def held(forecast: Floats, variance: Floats, risk_aversion: float, cap: float) -> Floats:
    """Weights of a mean-variance investor, forecast / (risk aversion x variance), cut at plus and minus the cap.

    >>> held(np.array([0.06]), np.array([0.04]), 3.0, 1.5).item()
    0.5
    """
    weights: Floats = np.clip(forecast / (risk_aversion * variance), -cap, cap)
    return weights


def certainty_equivalent(returns: Floats, risk_aversion: float, years: float) -> float:
    """Mean less half risk aversion times variance of returns over `years` each, per year."""
    known = returns[np.isfinite(returns)]
    return float(known.mean() - risk_aversion / 2.0 * known.var(ddof=1)) / years
