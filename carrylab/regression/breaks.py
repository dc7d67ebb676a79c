"""One unknown break: the largest Wald statistic over all dates it could have, its p-value, and the date."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from scipy import special

from carrylab.errors import SampleError
from carrylab.regression.longrun import kernel_sum
from carrylab.regression.sample import Bools, Floats

TRIM = 0.15
# P(sup W > x) = P(chi2 of eta > a + b x) at 15% trimming: a, b, eta by number of breaking coefficients.
HANSEN: Mapping[int, tuple[float, float, float]] = MappingProxyType(
    {
        1: (-0.98828874, 1.01604712, 2.96752918),
        2: (-1.65273586, 1.05932633, 4.69340428),
        3: (-2.04820499, 1.13491785, 6.75208304),
        4: (-2.52186324, 1.10727065, 7.95561422),
    }
)
SINGULAR = 1e12
GRID, DRAWS, SEED = 1000, 10_000, 20260101
BAI = 11.0  # 95% quantile of the law of a break's date, in units of its scale (Bai 1997)


@dataclass(frozen=True, eq=False, slots=True)
class Break:
    """The break: `at`, the row of the last period of the old regime; `statistic` W, `coefficients` breaking.

    `values` (T,) of W at every date a break was looked for, NaN elsewhere; `p_value` of the largest. `lower` and
    `upper`: rows of a 95% interval for the date, -1 where none is defensible. `change` (k,) of the coefficients.
    """

    at: int
    statistic: float
    p_value: float
    coefficients: int
    values: Floats
    lower: int
    upper: int
    change: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Question:
    """Outcomes `y` (T, N) on `breaking` (T, N, k) and `stable` (T, N, m) terms, in the rows of `mask` (T, N).

    `entity`: entity means are taken out of everything; else constants stand among the terms. `lags` of the Bartlett
    sum of date scores.
    """

    y: Floats
    breaking: Floats
    stable: Floats
    mask: Bools
    entity: bool
    lags: int = 0


def sup_wald(asked: Question, *, trim: float = TRIM) -> Break:
    """Test that the coefficients on the breaking terms are the same before and after any date.

    y on stable terms, breaking terms, and breaking terms from t > d on. W(d) = delta' V^-1 delta with date scores,
    Bartlett lags and the factor n / (n - parameters), d so that at least ceil(trim n) used dates stand on either side.
    p-values by Hansen (1997, JBES 15:60) at 15% trimming and up to four coefficients, else from the limit of the
    statistic by simulation.
    Source: Andrews (1993, Econometrica 61:821). The date's interval after Bai (1997, REStat 79:551), for one breaking
    coefficient and outcomes that do not overlap.
    """
    used = np.flatnonzero(asked.mask.any(axis=1))
    n, k = len(used), asked.breaking.shape[2]
    edge = math.ceil(trim * n)
    if n - 2 * edge < 1 or edge <= k:
        raise SampleError(f"{n} dates with {trim:.0%} trimmed at either end leave no date to look for a break at")
    values, changes = np.full(len(asked.mask), np.nan), np.full((len(asked.mask), k), np.nan)
    for row in used[edge - 1 : n - edge]:
        values[row], changes[row] = _at(asked, int(row))
    if not np.isfinite(values).any():
        raise SampleError("the terms do not vary on both sides of any date; there is no break to look for")
    at = int(np.nanargmax(values))
    lower, upper = _interval(asked, at, changes[at])
    return Break(at, float(values[at]), p_value(float(values[at]), k, trim), k, values, lower, upper, changes[at])


def p_value(statistic: float, coefficients: int, trim: float = TRIM) -> float:
    """Probability of a larger sup-Wald statistic where there is no break."""
    if trim != TRIM or coefficients not in HANSEN:
        return float((1 + (limit(coefficients, trim) >= statistic).sum()) / (DRAWS + 1))
    a, b, eta = HANSEN[coefficients]
    return 1.0 if a + b * statistic <= 0 else float(special.chdtrc(eta, a + b * statistic))


def limit(coefficients: int, trim: float) -> Floats:
    """Draws of sup over [trim, 1 - trim] of |B(s) - s B(1)|^2 / (s (1 - s)), B of `coefficients` dimensions."""
    rng = np.random.default_rng(SEED)
    share = np.arange(1, GRID + 1) / GRID
    inside = (share >= trim) & (share <= 1 - trim)
    found = np.empty(DRAWS)
    for at in range(0, DRAWS, 1000):
        total = np.zeros((1000, int(inside.sum())))
        for _ in range(coefficients):
            walk = np.cumsum(rng.standard_normal((1000, GRID)), axis=1) / math.sqrt(GRID)
            bridge = walk - share * walk[:, -1:]
            total += bridge[:, inside] ** 2
        found[at : at + 1000] = (total / (share * (1 - share))[inside]).max(axis=1)
    return found


def _within(values: Floats, asked: Question) -> Floats:
    """Values (T, N, p) in the rows in use, less their entity's means where there are entity effects."""
    mask = asked.mask[:, :, None]
    kept = values * mask
    if not asked.entity:
        return kept
    centred: Floats = (kept - kept.sum(axis=0) / np.maximum(mask.sum(axis=0), 1)) * mask
    return centred


def _design(asked: Question, row: int) -> Floats:
    """Stable and breaking terms, without those that the effects take out, and breaking terms from after the row on."""
    before = _within(np.concatenate([asked.stable, asked.breaking], axis=2), asked)
    before = before[:, :, np.abs(before).max(axis=(0, 1)) > 0]
    return np.concatenate([before, _within(_after(asked.breaking, row), asked)], axis=2)


def _at(asked: Question, row: int) -> tuple[float, Floats]:
    """W and the change of the coefficients for a break after one row; NaN where a side does not vary."""
    k = asked.breaking.shape[2]
    design = _design(asked, row)
    outcome = _within(asked.y[:, :, None], asked)[:, :, 0]
    flat = design.reshape(-1, design.shape[2])
    moments = flat.T @ flat
    if np.linalg.cond(moments) > SINGULAR:
        return math.nan, np.full(k, np.nan)
    bread = np.linalg.inv(moments)
    slopes = bread @ (flat.T @ outcome.ravel())
    errors = outcome - design @ slopes
    scores = np.einsum("tik,ti->tk", design, errors)
    count = int(asked.mask.sum())
    free = count - design.shape[2] - (int(asked.mask.any(axis=0).sum()) if asked.entity else 0)
    variance = bread @ kernel_sum(scores, "bartlett", asked.lags) @ bread * count / free
    delta = slopes[-k:]
    return float(delta @ np.linalg.solve(variance[-k:, -k:], delta)), delta


def _interval(asked: Question, at: int, change: Floats) -> tuple[int, int]:
    """Rows of the 95% interval of the date: the estimate plus and minus 11 Omega / (delta Q)^2 dates, one more each."""
    if asked.lags or len(change) != 1:
        return -1, -1
    x = _within(asked.breaking, asked)
    design = _design(asked, at)
    outcome = _within(asked.y[:, :, None], asked)[:, :, 0]
    errors = outcome - design @ np.linalg.lstsq(design.reshape(-1, design.shape[2]), outcome.ravel(), rcond=None)[0]
    used = np.flatnonzero(asked.mask.any(axis=1))
    moment = float((x**2).sum()) / len(used)
    spread = float((np.einsum("tik,ti->t", x, errors) ** 2).sum()) / len(used)
    reach = math.floor(BAI * spread / (float(change[0]) * moment) ** 2) + 1
    place = int(np.searchsorted(used, at))
    return int(used[max(place - reach, 0)]), int(used[min(place + reach, len(used) - 1)])


def _after(values: Floats, row: int) -> Floats:
    later = np.zeros_like(values)
    later[row + 1 :] = values[row + 1 :]
    return later
