"""The reverse-regression interval: one-period outcomes on a sum of past signals, read as the long-horizon slope."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.law import critical
from carrylab.regression.sample import Bools, Floats


@dataclass(frozen=True, slots=True)
class Reverse:
    """Long-horizon `slope`, its `std_error` and interval, from the reverse regression's slope and variance ratio.

    `reverse_slope` of the one-period outcome on the summed signal and its `reverse_error`; `ratio` the variance of
    the summed signal over the signal's; `n_obs` rows used.
    """

    slope: float
    std_error: float
    lower: float
    upper: float
    reverse_slope: float
    reverse_error: float
    ratio: float
    n_obs: int


def reverse_interval(signal: Floats, outcome: Floats, weights: Floats, confidence: float) -> Reverse:
    """Interval for the slope of Y_t = sum_{j=1..h} weight_j y_{t+j} on x_t that needs no overlap.

    With X_t = sum_{j=1..h} weight_j x_{t-j+1}, stationarity gives Cov(Y_t, x_t) = Cov(y_{t+1}, X_t), so slope =
    c Var(X) / Var(x), c the slope of y_{t+1} on X_t. c has date scores s_t = sum_i Xd_it e_i,t+1 and
    Var(c) = sum_t s_t^2 / (sum Xd^2)^2: no lag. The interval is c's, times the ratio of the variances in the same rows,
    which is taken as known.
    `signal` and `outcome` (T, N), the outcome in the row of the period in which it falls, NaN for holes; a row needs
    y_{t+1} and the h last signals. Entity means are taken out. `weights` (h,), ones for a plain sum. Law normal.
    Raises InferenceError with fewer than three rows, or where nothing varies.
    Source: Hodrick (1992, RFS 5:357); Wei and Wright (2013, J. Appl. Econometrics 28:353), who restrict the ratio by
    a vector autoregression; the sample's ratio and the panel's date sums are our own.
    """
    total = _past_sums(signal[:-1], weights)
    rows: Bools = np.isfinite(total) & np.isfinite(outcome[1:])
    summed, own, y = (_demeaned(part, rows) for part in (total, signal[:-1], outcome[1:]))
    squares, own_squares = float((summed**2).sum()), float((own**2).sum())
    if rows.sum() < 3 or not min(squares, own_squares) > 0:
        raise InferenceError(
            f"the reverse regression over {len(weights)} periods has {rows.sum()} rows in which the signal can vary; "
            "take a shorter horizon or a longer sample"
        )
    slope = float((summed * y).sum()) / squares
    scores = (summed * (y - slope * summed)).sum(axis=1)
    error, ratio = math.sqrt(float(scores @ scores)) / squares, squares / own_squares
    reach = float(critical(confidence, math.inf)) * error
    return Reverse(
        slope=slope * ratio,
        std_error=error * ratio,
        lower=(slope - reach) * ratio,
        upper=(slope + reach) * ratio,
        reverse_slope=slope,
        reverse_error=error,
        ratio=ratio,
        n_obs=int(rows.sum()),
    )


def _past_sums(signal: Floats, weights: Floats) -> Floats:
    """Weighted sum of the signal at t, t-1, .., t-h+1; NaN where one is missing."""
    total = np.full_like(signal, np.nan)
    whole = len(signal) - len(weights) + 1
    if whole > 0:
        total[len(weights) - 1 :] = sum(w * signal[len(weights) - 1 - j :][:whole] for j, w in enumerate(weights))
    return total


def _demeaned(values: Floats, rows: Bools) -> Floats:
    """Values less their entity mean over the rows, zero elsewhere."""
    inside = np.where(rows, values, 0.0)
    rest: Floats = (inside - inside.sum(axis=0) / np.maximum(rows.sum(axis=0), 1)) * rows
    return rest
