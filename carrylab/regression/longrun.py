"""The long-run sum: covariance of the sum over dates of stacked series, by one table of kernels."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.sample import Floats

DUST = 1e-12  # part of a series' largest value below which it is rounding left by taking effects out
NEGATIVE = -1e-8  # an eigenvalue of the scaled covariance below this is no rounding


@dataclass(frozen=True, eq=False, slots=True)
class LongRun:
    """Covariance of a sum over dates and the law that goes with it.

    `covariance` (m, m) of the sum, not of the mean. `df`: degrees of freedom of the Student t, infinity for the
    normal. `kind` as used, `lags` of a kernel, `cosines` of the cosine estimator (else 0). `problem` says in
    words what was wrong with the kind asked for and what stands in its place; empty where nothing was.
    """

    covariance: Floats
    df: float
    kind: str
    lags: int
    cosines: int
    problem: str


@dataclass(frozen=True, slots=True)
class Kernel:
    """One way to sum autocovariances: the weight of lag l at truncation L, its name in print and its source."""

    weight: Callable[[int, int], float]
    words: str
    source: str
    positive: bool


KERNELS: Mapping[str, Kernel] = MappingProxyType(
    {
        "date": Kernel(lambda _l, _L: 0.0, "no lag, summed by date", "White (1980)", True),
        "bartlett": Kernel(
            lambda lag, last: 1.0 - lag / (last + 1),
            "Newey-West / Driscoll-Kraay, Bartlett kernel",
            "Newey and West (1987, Econometrica 55:703); Driscoll and Kraay (1998, REStat 80:549)",
            True,
        ),
        "rectangular": Kernel(
            lambda _lag, _last: 1.0,
            "Hansen-Hodrick, rectangular kernel",
            "Hansen and Hodrick (1980, JPE 88:829)",
            False,
        ),
    }
)


def longrun(series: Floats, kind: str, *, lags: int = 0, cosines: int | None = None) -> LongRun:
    """Covariance of the sum over dates of `series` (T, m), rows on the calendar and zero where unused.

    date, bartlett, rectangular: V = G_0 + sum_{l=1..L} k(l, L) (G_l + G_l'), G_l = sum_t s_t s_{t-l}'.
    cosine: V = (n / nu) sum_{j=1..nu} Lam_j Lam_j', Lam_j = sqrt(2/n) sum_t s_t cos(pi j (t - 1/2) / n), over the
    n rows from the first to the last used, with Student t of nu degrees of freedom (Mueller 2007, J. Econometrics
    141:1331; Lazarus, Lewis, Stock and Watson 2018, JBES 36:541); `lags` is then the overlap that caps nu.
    A rectangular covariance that is not positive definite gives Bartlett with the same lag, and `problem` says so.
    """
    if kind == "cosine":
        return _cosine(series, lags, cosines)
    covariance = kernel_sum(series, kind, lags)
    if KERNELS[kind].positive or _is_positive(covariance, series):
        return LongRun(covariance, math.inf, kind, 0 if kind == "date" else lags, 0, "")
    problem = (
        f"the rectangular kernel with lag {lags} gives a covariance that is not positive definite; "
        "Bartlett with the same lag stands in its place"
    )
    return LongRun(kernel_sum(series, "bartlett", lags), math.inf, "bartlett", lags, 0, problem)


def cosine_count(n: int, overlap: int) -> int:
    """Number of cosines: .4 n^(2/3) rounded down, at most the n/h independent windows, at least 2.

    The cap is ours: without it long horizons read frequencies at which overlapping series have no power.
    """
    return max(2, min(int(0.4 * n ** (2 / 3)), n // (overlap + 1)))


def used_span(series: Floats) -> slice:
    """Rows from the first to the last in which any of the series is not zero, rounding aside."""
    size = np.abs(series)
    used = np.flatnonzero((size > DUST * size.max(axis=0, initial=0.0)).any(axis=1))
    return slice(0, 0) if not len(used) else slice(int(used[0]), int(used[-1]) + 1)


def kernel_sum(series: Floats, kind: str, lags: int) -> Floats:
    """G_0 + sum_{l=1..lags} k(l) (G_l + G_l') as it comes, positive definite or not."""
    kernel = KERNELS[kind]
    total: Floats = series.T @ series
    for lag in range(1, min(lags, len(series) - 1) + 1):
        weight = kernel.weight(lag, lags)
        if weight:
            cross = series[lag:].T @ series[:-lag]
            total += weight * (cross + cross.T)
    return total


def _is_positive(covariance: Floats, series: Floats) -> bool:
    """No combination has a negative variance; legs that add up leave it zero, which is allowed."""
    scale = np.sqrt((series**2).sum(axis=0))
    scale[scale == 0] = 1.0
    scaled = covariance / np.outer(scale, scale)
    moving = (series != 0).any(axis=0)
    return bool((np.diag(scaled)[moving] > 0).all() and np.linalg.eigvalsh(scaled)[0] > NEGATIVE)


def _cosine(series: Floats, overlap: int, cosines: int | None) -> LongRun:
    inside = series[used_span(series)]
    n = len(inside)
    count = cosine_count(n, overlap) if cosines is None else cosines
    if not 1 <= count < n:
        raise InferenceError(
            f"{count} cosines need more than {count} dates and there are {n}; use fewer cosines or another error kind"
        )
    angles = np.pi * np.outer(np.arange(1, count + 1), np.arange(n) + 0.5) / n
    loads = math.sqrt(2.0 / n) * np.cos(angles) @ inside
    return LongRun((n / count) * loads.T @ loads, float(count), "cosine", 0, count, "")
