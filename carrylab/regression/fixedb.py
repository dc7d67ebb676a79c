"""The law of a Bartlett t statistic whose bandwidth is a fixed part of the sample: p-values and critical values."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike
from scipy.optimize import brentq

from carrylab.regression.sample import Floats

GRID = 400  # points that stand for the sample; 800 move no critical value by more than one in a thousand
NODES, WEIGHTS = np.polynomial.legendre.leggauss(96)
SINE_SQUARED = np.sin(np.pi / 4 * (NODES + 1.0)) ** 2  # of angles from 0 to pi/2
WIDEST = 1e3  # a critical value beyond it is not looked for


def tail(statistic: ArrayLike, bandwidth: float) -> Floats:
    """Two-sided p-value, P(|t*| > |statistic|), of the fixed-b law with the Bartlett kernel.

    t* = W(1) / sqrt(Q_b), Q_b = (2/b) [int_0^1 B(r)^2 dr - int_0^(1-b) B(r) B(r+b) dr], W a Brownian motion and B
    the bridge that is independent of its end. Q_b is a sum of lambda_k times independent chi-squares, lambda_k the
    eigenvalues of the demeaned kernel max(0, 1 - |r - s| / b), so with P(|Z| > x) = (2/pi) int_0^(pi/2)
    exp(-x^2 / (2 sin^2 a)) da (Craig 1991)
        p = (2/pi) int_0^(pi/2) prod_k (1 + t^2 lambda_k / sin^2 a)^(-1/2) da.
    `bandwidth` b = (lag + 1) / n in (0, 1], n dates.
    Source: Kiefer and Vogelsang (2005, Econometric Theory 21:1130) for the law; the integral is our own way to it.

    >>> tail(2.5, 0.2).round(3).item()
    0.053
    """
    value = np.asarray(statistic, float)
    scaled = value.reshape(-1, 1) ** 2 / SINE_SQUARED
    log_product = np.log1p(scaled[:, :, None] * _eigenvalues(bandwidth)).sum(axis=2)
    return np.asarray((np.exp(-0.5 * log_product) @ WEIGHTS / 2.0).reshape(value.shape))


@lru_cache(maxsize=256)
def critical(confidence: float, bandwidth: float) -> float:
    """Two-sided critical value: the c with P(|t*| > c) = 1 - confidence, the law and units of `tail`."""
    return float(brentq(lambda c: float(tail(c, bandwidth)) - (1.0 - confidence), 0.0, WIDEST, xtol=1e-9))


def bandwidth_lag(n: int, overlap: int) -> int:
    """Lag for fixed-b inference: bandwidth ceil(1.3 sqrt(n)) less one, at least the overlap, at most n - 1.

    Source: Lazarus, Lewis, Stock and Watson (2018, JBES 36:541); the floor at the overlap is ours.
    """
    return min(max(math.ceil(1.3 * math.sqrt(n)) - 1, overlap), n - 1)


@lru_cache(maxsize=256)
def _eigenvalues(bandwidth: float) -> Floats:
    """Eigenvalues of the demeaned Bartlett kernel on the grid, over its size."""
    gaps = np.abs(np.subtract.outer(np.arange(GRID), np.arange(GRID)))
    kernel = np.maximum(0.0, 1.0 - gaps / (bandwidth * GRID))
    kernel -= kernel.mean(axis=0)
    kernel -= kernel.mean(axis=1)[:, None]
    found: Floats = np.maximum(np.linalg.eigvalsh(kernel) / GRID, 0.0)
    found.setflags(write=False)
    return found
