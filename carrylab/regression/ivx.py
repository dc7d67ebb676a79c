"""IVX for one series, short and long horizon, with the finite-sample correction."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.instrument import EXPONENT, filtered
from carrylab.regression.law import chi_squared_tail
from carrylab.regression.sample import Floats

SHORTEST = 10  # one-period outcomes; below it the long-run sums of the correction mean nothing


@dataclass(frozen=True, eq=False, slots=True)
class Ivx:
    """IVX of one series: one-period slopes (K,), their covariance (K, K), and the joint test that all are zero.

    `root`: R_z of the filter. `lags` of the long-run sums. `wald` is chi-squared with K degrees of freedom.
    """

    slopes: Floats
    covariance: Floats
    wald: float
    p_value: float
    root: float
    lags: int


@dataclass(frozen=True, eq=False, slots=True)
class _Moments:
    """Variance of the outcome's residual, and what is left of it once the terms' long-run shocks are out."""

    variance: float
    corrected: float
    lags: int


def ivx(terms: Floats, outcome: Floats, *, horizon: int = 1) -> Ivx:
    """IVX slopes of one-period outcomes on terms that may be persistent and endogenous.

    With z_t = R z_{t-1} + (x_t - x_{t-1}), z_0 = 0, R = 1 - 1/T^.95, sums over h periods y^h, x^h, z^h and
    n = T - h + 1 starts: A = (sum z_t (x^h_t - mean)')^-1 sum z_t (y^h_t - mean), the one-period slope at any h;
    M = s_ee sum z^h z^h' - n zbar^h zbar^h' s_FM, s_FM = s_ee - O_eu O_uu^-1 O_ue; covariance B^-1 M B^-1'.
    O are Bartlett sums with lag floor(T^(1/3)) of e, the outcome's residual on (1, x_t), and u, the term's residual
    on its own past with a constant. Its variance is homoskedastic: under changing volatility use the instrument with
    one-period scores.
    `terms` (T+1, K) in time order without holes; `outcome` (T+1,) in the row of the period in which it falls, so row 0
    plays no part. Raises InferenceError for holes or too short a series.
    Source: Kostakis, Magdalinos and Stamatogiannis (2015, RFS 28:1506), eqs (4)-(5), (13)-(15), (33)-(34).
    """
    _require_whole(terms, outcome, horizon)
    x, y = terms[:-1], outcome[1:]
    periods = len(y)
    root = 1.0 - periods**-EXPONENT
    z = filtered(terms[:, None], np.ones((periods + 1, 1), dtype=np.bool_), root)[:-1, 0]
    moments = _moments(terms, y)
    sums_x, sums_y, sums_z = _sums(x, horizon), _sums(y[:, None], horizon), _sums(z, horizon)
    starts = z[: len(sums_x)]
    inverse = np.linalg.inv(starts.T @ (sums_x - sums_x.mean(axis=0)))
    slopes = (inverse @ starts.T @ (sums_y - sums_y.mean()))[:, 0]
    mean = sums_z.mean(axis=0)
    middle = moments.variance * sums_z.T @ sums_z - len(sums_z) * moments.corrected * np.outer(mean, mean)
    covariance = inverse @ middle @ inverse.T
    wald = float(slopes @ np.linalg.solve(covariance, slopes))
    return Ivx(slopes, covariance, wald, chi_squared_tail(wald, len(slopes)), root, moments.lags)


def _require_whole(terms: Floats, outcome: Floats, horizon: int) -> None:
    if not (np.isfinite(terms).all() and np.isfinite(outcome[1:]).all()):
        raise InferenceError(
            "IVX of one series needs a series without holes; use the instrument with one-period scores"
        )
    if len(terms) - 1 < max(SHORTEST, 2 * horizon):
        raise InferenceError(
            f"IVX at {horizon} periods needs {max(SHORTEST, 2 * horizon)} one-period outcomes and there are "
            f"{len(terms) - 1}; take a shorter horizon or a longer sample"
        )


def _sums(values: Floats, horizon: int) -> Floats:
    """Sums over `horizon` rows from each start (T - h + 1, K)."""
    total = np.vstack([np.zeros((1, values.shape[1])), np.cumsum(values, axis=0)])
    return total[horizon:] - total[:-horizon]


def _moments(terms: Floats, y: Floats) -> _Moments:
    periods, lags = len(y), int(round(len(y) ** (1 / 3), 9))
    design = np.column_stack([np.ones(periods), terms[:-1]])
    projector = np.linalg.pinv(design)
    e = y - design @ (projector @ y)
    u = terms[1:] - design @ (projector @ terms[1:])
    own, cross = u.T @ u, u.T @ e
    for lag in range(1, lags + 1):
        weight = 1.0 - lag / (lags + 1)
        later = u[lag:].T @ u[:-lag]
        own += weight * (later + later.T)
        cross += weight * u[lag:].T @ e[:-lag]
    variance = float(e @ e) / periods
    return _Moments(variance, variance - float(cross @ np.linalg.solve(own, cross)) / periods, lags)
