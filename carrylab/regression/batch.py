"""Small systems and long-run errors of many draws at once: every array has the draws on its last axis, contiguous."""

from __future__ import annotations

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.sample import Floats

COLLINEAR = 1e-12  # a pivot below this part of its diagonal leaves a term that the others explain


def factor(matrix: Floats) -> Floats:
    """Lower Cholesky factors (K, K, B) of symmetric positive definite matrices (K, K, B).

    Raises InferenceError where a draw's matrix is singular to rounding.
    """
    size, lower = len(matrix), np.zeros_like(matrix)
    for k in range(size):
        for j in range(k + 1):
            rest = matrix[k, j] - np.einsum("ib,ib->b", lower[k, :j], lower[j, :j])
            if j < k:
                lower[k, j] = rest / lower[j, j]
                continue
            singular = int((rest <= COLLINEAR * matrix[k, k]).sum())
            if singular:
                raise InferenceError(
                    f"{singular} of {matrix.shape[2]} draws hold too few different dates for {size} terms; "
                    "use longer blocks, more dates or fewer added predictors"
                )
            lower[k, k] = np.sqrt(rest)
    return lower


def solve(lower: Floats, right: Floats) -> Floats:
    """Solutions (K, R, B) of A x = right, with A = lower lower' for factors (K, K, B) and right sides (K, R, B)."""
    found = np.empty_like(right)
    for k in range(len(lower)):
        found[k] = (right[k] - np.einsum("ib,irb->rb", lower[k, :k], found[:k])) / lower[k, k]
    for k in reversed(range(len(lower))):
        found[k] = (found[k] - np.einsum("ib,irb->rb", lower[k + 1 :, k], found[k + 1 :])) / lower[k, k]
    return found


def invert(lower: Floats) -> Floats:
    """Inverses (K, K, B) of A = lower lower'."""
    size, draws = len(lower), lower.shape[2]
    return solve(lower, np.ascontiguousarray(np.broadcast_to(np.eye(size)[:, :, None], (size, size, draws))))


def bartlett(totals: Floats, lags: int) -> Floats:
    """Bartlett long-run sums (...) of series with themselves, from their running totals (T + 1, ...), zero first.

    G_0 + 2 sum_{l=1..L} (1 - l/(L+1)) G_l is exactly the sum of squares over all windows of L + 1 dates, cut at both
    ends, over L + 1.
    """
    T, whole = len(totals) - 1, totals[-1]
    cut = min(lags + 1, T)
    middle = totals[cut:] - totals[: T - cut + 1]
    found = _squares(totals[1:cut]) + _squares(middle) + _squares(whole - totals[T - cut + 1 : T])
    found += max(lags + 1 - T, 0) * whole**2
    return found / (lags + 1)


def running(series: Floats) -> Floats:
    """Running totals (T + 1, ...) of series (T, ...), the first of them zero."""
    totals = np.zeros((len(series) + 1, *series.shape[1:]))
    np.cumsum(series, axis=0, out=totals[1:])
    return totals


def _squares(series: Floats) -> Floats:
    total: Floats = np.einsum("t...,t...->...", series, series)
    return total
