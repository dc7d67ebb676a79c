"""Amihud-Hurvich: the slope of one persistent, endogenous signal, corrected one period ahead."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.sample import Bools, Floats

CAP = 0.9999  # a corrected persistence of one or more is set to it
FEWEST = 4  # pairs of dates: three coefficients and a variance


@dataclass(frozen=True, slots=True)
class AmihudHurvich:
    """Corrected slope and its standard error; law normal.

    `persistence` after correction, `capped` where the correction reached one; `shock_slope` of the outcome on the
    corrected shocks of the signal; `n` pairs used.
    """

    slope: float
    std_error: float
    persistence: float
    capped: bool
    shock_slope: float
    n: int


def amihud_hurvich(signal: Floats, outcome: Floats) -> AmihudHurvich:
    """Slope of y_{t+1} on x_t with the signal's own shocks in the regression.

    phi_c = phi + (1 + 3 phi)/n + 3 (1 + 3 phi)/n^2, phi by least squares;
    v_t+1 = x_t+1 - (1 - phi_c) mean(x) - phi_c x_t;
    regress y_t+1 on (1, x_t, v_t+1): slope b_c and g on v;
    se^2 = g^2 (1 + 3/n + 9/n^2)^2 Var(phi) + se_ols^2(b_c).
    `signal` (T,) and `outcome` (T,), the outcome in the row of the period in which it falls; NaN for holes, a pair
    needs x_t, x_t+1 and y_t+1. One series, one period ahead only.
    Raises InferenceError with fewer than 4 pairs, or where the signal follows its own past exactly.
    Source: Amihud and Hurvich (2004, JFQA 39:813).
    """
    before, after, y = _pairs(signal, outcome)
    n = len(y)
    phi, phi_error = _persistence(before, after)
    corrected = phi + (1 + 3 * phi) / n + 3 * (1 + 3 * phi) / n**2
    used = CAP if corrected >= 1 else corrected
    design = np.column_stack([np.ones(n), before, after - used * before])
    solved = np.linalg.inv(design.T @ design)
    found = solved @ (design.T @ y)
    rest = y - design @ found
    ols = float(rest @ rest) / (n - 3) * float(solved[1, 1])
    grown = float(found[2]) * (1 + 3 / n + 9 / n**2) * phi_error
    return AmihudHurvich(float(found[1]), math.hypot(grown, math.sqrt(ols)), used, corrected >= 1, float(found[2]), n)


def _pairs(signal: Floats, outcome: Floats) -> tuple[Floats, Floats, Floats]:
    """x_t, x_t+1 and y_t+1 where all three stand."""
    there: Bools = np.isfinite(signal[:-1]) & np.isfinite(signal[1:]) & np.isfinite(outcome[1:])
    if there.sum() < FEWEST:
        raise InferenceError(
            f"Amihud-Hurvich needs {FEWEST} pairs of dates and there are {there.sum()}; take a longer sample"
        )
    return signal[:-1][there], signal[1:][there], outcome[1:][there]


def _persistence(before: Floats, after: Floats) -> tuple[float, float]:
    """Least-squares persistence with a constant, and its textbook standard error."""
    x, y = before - before.mean(), after - after.mean()
    squares = float(x @ x)
    phi = float(x @ y) / squares if squares > 0 else math.nan
    rest = float(((y - phi * x) ** 2).sum())
    if not rest > 1e-24 * float(y @ y):
        raise InferenceError("the signal follows its own past exactly, so it has no shocks to correct with")
    return phi, math.sqrt(rest / (len(x) - 2) / squares)
