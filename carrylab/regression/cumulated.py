"""Slopes of one-period outcomes cumulated over every horizon on one signal, with date scores, in one pass."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.errors import SampleError
from carrylab.regression.sample import Bools, Floats, Ints


@dataclass(frozen=True, eq=False, slots=True)
class Cumulated:
    """One row a horizon: `slopes` (H,), `r2` (H,) within entities, `n_obs` and `n_dates` (H,).

    Errors (H,): `bartlett` with lag h - 1 (Driscoll and Kraay 1998), `one_period` under the null (Hodrick 1992, 1B,
    summed over entities by date).
    """

    horizons: Ints
    slopes: Floats
    r2: Floats
    bartlett: Floats
    one_period: Floats
    n_obs: Ints
    n_dates: Ints


@dataclass(frozen=True, eq=False, slots=True)
class _Pair:
    """Signal and outcomes with zeros for holes: `x` and `used` (T, N); sums to date (T + 1, N) of outcomes and holes.

    `whole`: there are no holes.
    """

    x: Floats
    used: Bools
    outcomes: Floats
    total: Floats
    holes: Ints
    whole: bool


def cumulated(signal: Floats, outcomes: Floats, horizons: Sequence[int], *, null: bool = True) -> Cumulated:
    """Regress Y_it(h) = sum_{j=1..h} r_{i,t+j} on x_it with entity effects, for each h of `horizons`.

    `signal` (T, N) and `outcomes` (T, N), each in the row of its own period, NaN for holes; a row counts where the
    signal and all h outcomes after it stand. With x~ and Y~ the entity's means out: b = sum x~ Y~ / sum x~^2, date
    score s_t = sum_i x~ (Y~ - b x~); the Bartlett sum with lag L is sum_t (s_t + ... + s_{t+L})^2 / (L + 1) over
    zero-padded scores, exactly; 1B as in `null_influence`, cut at both edges, NaN where `null` is false.
    Raises SampleError where a horizon has no row in which the signal varies.
    """
    pair = _pair(signal, outcomes)
    rows = [_at(pair, int(h), null) for h in horizons]
    slopes, r2, bartlett, one_period, n_obs, n_dates = (np.array(column) for column in zip(*rows, strict=True))
    return Cumulated(np.asarray(horizons, dtype=np.int64), slopes, r2, bartlett, one_period, n_obs, n_dates)


def _pair(signal: Floats, outcomes: Floats) -> _Pair:
    used = np.isfinite(signal)
    stands = np.isfinite(outcomes)
    filled = np.where(stands, outcomes, 0.0)
    zero = np.zeros((1, signal.shape[1]))
    total = np.vstack([zero, np.cumsum(filled, axis=0)])
    holes = np.vstack([zero.astype(np.int64), np.cumsum(~stands, axis=0)])
    whole = bool(used.all() and stands.all())
    return _Pair(np.where(used, signal, 0.0), used, filled, total, holes, whole)


def _at(pair: _Pair, h: int, null: bool) -> tuple[float, ...]:
    """slope, R2, Bartlett error, 1B error, rows and dates of one horizon."""
    n = max(len(pair.x) - h, 0)
    mask = pair.used[:n] if pair.whole else pair.used[:n] & (pair.holes[h + 1 :] == pair.holes[1 : n + 1])
    x = _within(pair.x[:n].copy(), mask, pair.whole)
    y = _within(pair.total[h + 1 :] - pair.total[1 : n + 1], mask, pair.whole)
    xx = np.einsum("ti,ti->t", x, x)
    total = float(xx.sum())
    if not total > 0:
        raise SampleError(f"horizon {h}: no row in which the signal varies and all {h} outcomes after it stand")
    xy = np.einsum("ti,ti->t", x, y)
    slope = float(xy.sum()) / total
    r2 = slope * float(xy.sum()) / float(np.einsum("ti,ti->", y, y))
    bartlett = math.sqrt(bartlett_sum(xy - slope * xx, h - 1)) / total
    one_period = _one_period(pair, x, mask, h) / total if null else math.nan
    return slope, r2, bartlett, one_period, int(mask.sum()), int(mask.any(axis=1).sum())


def _within(values: Floats, mask: Bools, whole: bool) -> Floats:
    """Values (n, N) less the mean of each entity's own rows, in place, zero outside the mask."""
    if whole:
        values -= values.sum(axis=0) / max(len(values), 1)
        return values
    values *= mask
    values -= values.sum(axis=0) / np.maximum(mask.sum(axis=0), 1) * mask
    return values


def bartlett_sum(scores: Floats, lag: int) -> float:
    """G_0 + 2 sum_{l=1..lag} (1 - l / (lag + 1)) G_l of scores (n,), by moving sums of the zero-padded scores."""
    sums = np.concatenate([np.zeros(lag + 1), np.cumsum(scores), np.full(lag, scores.sum())])
    moving = sums[lag + 1 :] - sums[: len(sums) - lag - 1]
    return float(moving @ moving) / (lag + 1)


def _one_period(pair: _Pair, x: Floats, mask: Bools, h: int) -> float:
    """Root of sum_tau (sum_i u_tau W_tau)^2, W the sum of x~ over the origins whose window covers tau."""
    here = _over_windows(mask.astype(np.float64), h, len(pair.x)) > 0
    outcome = pair.outcomes[1:] * here
    outcome -= outcome.sum(axis=0) / np.maximum(here.sum(axis=0), 1) * here
    scores = np.einsum("ti,ti->t", outcome, _over_windows(x, h, len(pair.x)))
    return math.sqrt(float(scores @ scores))


def _over_windows(values: Floats, h: int, periods: int) -> Floats:
    """Sum of values (n, N) over the h origins before each period from the second on, (periods - 1, N)."""
    sums = np.vstack([np.zeros((1, values.shape[1])), np.cumsum(values, axis=0)])
    period = np.arange(1, periods)
    window: Floats = sums[np.minimum(period, len(values))] - sums[np.maximum(period - h, 0)]
    return window
