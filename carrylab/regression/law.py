"""Reference laws: statistic, p-value and interval from an estimate, its error and its degrees of freedom."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from carrylab.regression import fixedb
from carrylab.regression.sample import Floats


@dataclass(frozen=True, eq=False, slots=True)
class Statistics:
    """Test of estimate = null: `statistic`, two-sided `p_value`, and the interval `lower` to `upper`."""

    statistic: Floats
    p_value: Floats
    lower: Floats
    upper: Floats


def statistics(
    estimate: ArrayLike,
    std_error: ArrayLike,
    null: ArrayLike,
    df: ArrayLike,
    confidence: float,
    bandwidth: float = 0.0,
) -> Statistics:
    """Two-sided test and interval by Student's t with `df` degrees of freedom, the normal where df is infinite.

    A `bandwidth` above zero, a part of the sample, means the fixed-b law instead. Arguments broadcast.
    statistic = (estimate - null) / std_error; NaN where the error is zero, for then there is no sampling variation to
    judge by, or where there is no null.

    >>> statistics(1.96, 1.0, 0.0, np.inf, 0.95).p_value.round(3).item()
    0.05
    """
    value, error, at, freedom = np.broadcast_arrays(
        *(np.asarray(part, float) for part in (estimate, std_error, null, df))
    )
    statistic = np.divide(value - at, error, out=np.full(value.shape, np.nan), where=error > 0)
    reach = critical(confidence, freedom, bandwidth) * error
    size = np.abs(statistic)
    p_value = fixedb.tail(size, bandwidth) if bandwidth else 2.0 * upper_tail(size, freedom)
    return Statistics(statistic, p_value, value - reach, value + reach)


def upper_tail(statistic: ArrayLike, df: ArrayLike) -> Floats:
    """Probability of a larger value under Student's t, the normal where df is infinite."""
    value, freedom = np.asarray(statistic, float), np.asarray(df, float)
    student = special.stdtr(np.where(np.isinf(freedom), 1.0, freedom), -value)
    return np.asarray(np.where(np.isinf(freedom), special.ndtr(-value), student))


def critical(confidence: float, df: ArrayLike, bandwidth: float = 0.0) -> Floats:
    """Two-sided critical value of Student's t, the normal where df is infinite, fixed-b with a bandwidth above zero."""
    freedom = np.asarray(df, float)
    if bandwidth:
        return np.full(freedom.shape, fixedb.critical(confidence, bandwidth))
    level = 0.5 + confidence / 2.0
    student = special.stdtrit(np.where(np.isinf(freedom), 1.0, freedom), level)
    return np.asarray(np.where(np.isinf(freedom), special.ndtri(level), student))


def chi_squared_tail(statistic: float, df: int) -> float:
    """Probability of a larger value under chi-squared."""
    return float(special.chdtrc(df, statistic))


def f_tail(statistic: float, numerator: float, denominator: float) -> float:
    """Probability of a larger value under F."""
    return float(special.fdtrc(numerator, denominator, statistic))
