"""A band that holds at all horizons at once, from the joint law of the estimates."""

from __future__ import annotations

import math

import numpy as np

from carrylab.regression.longrun import used_span
from carrylab.regression.sample import Floats

LEAST_COSINES = 8
DRAWS = 10_000


def sup_t(series: Floats, df: float, *, confidence: float, cosines: int, seed: int) -> float:
    """The number of standard errors that covers all estimates at once with the stated confidence.

    `series` (T, m): influence of m estimates on one calendar. Their correlation is that of `cosines` equal-weighted
    cosines (at least eight), Lam (nu, m); draws z = xi Lam / |Lam| with xi standard normal have it, and are divided by
    the root of a chi-squared with `df` degrees of freedom over df (infinite: normal). The quantile of max |z|.
    Source: Montiel Olea and Plagborg-Moller (2019, J. Applied Econometrics 34:1), plug-in sup-t band.
    """
    inside = series[used_span(series)]
    n, count = len(inside), max(cosines, LEAST_COSINES)
    angles = np.pi * np.outer(np.arange(1, count + 1), np.arange(n) + 0.5) / n
    loads = np.cos(angles) @ inside
    loads /= np.sqrt((loads**2).sum(axis=0))
    rng = np.random.default_rng(seed)
    largest = np.abs(rng.standard_normal((DRAWS, count)) @ loads).max(axis=1)
    if math.isfinite(df):
        largest /= np.sqrt(rng.chisquare(df, DRAWS) / df)
    return float(np.quantile(largest, confidence))
