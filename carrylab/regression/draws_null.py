"""The null of no predictability fitted to a panel: persistence estimated under it, and the shocks to draw from."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.bias import PERSISTENCE_CAP
from carrylab.regression.sample import Bools, Floats, Ints

ROUNDS = 3  # in which persistence and the slope of one period settle on each other
FEWEST = 12  # neighbouring dates an entity needs, for three coefficients and a bias correction of order 1/T


@dataclass(frozen=True, eq=False, slots=True)
class Fed:
    """A null in which the signal predicts: window sums of outcomes with step weights (H,) have this `slope` on it."""

    slope: float
    weights: Floats

    def one_period(self, persistence: Floats) -> Floats:
        """Slope (N,) of the next outcome: that of the sum over the mean of phi^(j-1), j = 1..H, with the weights."""
        ahead = persistence[:, None] ** np.arange(len(self.weights)) @ self.weights
        found: Floats = self.slope / ahead
        return found


@dataclass(frozen=True, eq=False, slots=True)
class Null:
    """y_{i,t+1} = mu_i + feed_i x_it + e, x_{i,t+1} = c_i + phi_i x_it + v, fitted entity by entity.

    `feed` (N,) is zero where nothing predicts; `level` (N,) is the mean that it gives the outcomes, so that their
    window sums have the same slope between entities as within them.
    `names` (N,) of the entities. `persistence` (N,): phi, `capped` (N,) where it reached .999. `mean` (N,) of the
    signal; `first` (N,) row of its first value and `start` (N,) that value less the mean. `outcome` (T, N): e, and
    `signal` (T, N): v with mean zero, both in the row of the period in which they fall, NaN where there is none.
    """

    names: tuple[str, ...]
    persistence: Floats
    capped: Bools
    mean: Floats
    first: Ints
    start: Floats
    outcome: Floats
    signal: Floats
    feed: Floats
    level: Floats

    @property
    def pairs(self) -> Bools:
        """Where both shocks of an entity stand (T, N)."""
        return np.isfinite(self.outcome) & np.isfinite(self.signal)


def fit_null(signal: Floats, outcomes: Floats, names: Sequence[str], fed: Fed | None = None) -> Null:
    """Fit the null to a signal (T, N) and its one-period outcomes (T, N), NaN for holes; `names` (N,).

    `fed`: how the signal predicts the outcomes under the null, None where it does not.

    phi_R is the slope of x_{t+1} on x_t in the regression on (1, x_t, e_{t+1}), the restricted seemingly unrelated
    estimate when nothing predicts; phi = phi_R + (1 - delta^2)(1 + 3 phi_R)/n, delta the correlation of e with the
    least-squares v, n the transitions, held within +-.999. With phi by plain least squares its error is the error
    of the predictive slope too, and the draws reject 6-12% of true nulls at 5%.
    Source: Kendall (1954, Biometrika 41:403) for the correction; putting both together is our own.
    """
    here = transitions(signal, outcomes)
    short = np.flatnonzero(here.sum(axis=0) < FEWEST)
    if len(short):
        raise InferenceError(
            f"{names[short[0]]} has {here[:, short[0]].sum()} dates on which the signal, the one before it and the "
            f"one-period outcome stand, draws need {FEWEST}; leave it out or choose errors that need no draws"
        )
    feed, shocks = np.zeros(signal.shape[1]), outcomes - _column_means(outcomes)
    for _ in range(ROUNDS if fed else 1):
        raw = np.array([_persistence(signal[:, i], shocks[:, i], here[:, i]) for i in range(signal.shape[1])])
        persistence = np.clip(raw, -PERSISTENCE_CAP, PERSISTENCE_CAP)
        if fed:
            feed = fed.one_period(persistence)
            shocks = _unpredicted(signal, outcomes, feed)
    mean, first = _column_means(signal), np.isfinite(signal).argmax(axis=0)
    moved = np.full_like(signal, np.nan)
    moved[1:] = signal[1:] - mean - persistence * (signal[:-1] - mean)
    return Null(
        names=tuple(names),
        persistence=persistence,
        capped=np.abs(raw) > PERSISTENCE_CAP,
        mean=mean,
        first=first,
        start=signal[first, np.arange(len(first))] - mean,
        outcome=shocks,
        signal=moved - _column_means(moved),
        feed=feed,
        level=mean * (fed.slope / fed.weights.sum()) if fed else np.zeros_like(mean),
    )


def transitions(signal: Floats, outcomes: Floats) -> Bools:
    """Where the signal, the one before it and the outcome in between stand (T-1, N)."""
    there = np.isfinite(signal)
    here: Bools = there[1:] & there[:-1] & np.isfinite(outcomes[1:])
    return here


def shock_pool(pairs: list[Bools]) -> Ints:
    """Rows that may be drawn: those in which any entity of any panel has both shocks."""
    return np.flatnonzero(np.any([part.any(axis=1) for part in pairs], axis=0))


def pooled_shocks(null: Null, pool: Ints) -> Floats:
    """Shocks of the drawn rows (2, D, N): outcome's and signal's, each entity's with mean zero.

    An entity without both shocks on a drawn date takes those of another of its own dates: its k-th missing date
    takes its k-th date that stands, and so round. So each entity keeps its own spread and the pairing of its
    two shocks, entities that miss the same dates stay together, and no date is drawn less often for a late start.
    """
    both = np.stack([null.outcome, null.signal], axis=2)[pool]
    filled = repeated_in_turn(both, null.pairs[pool]).transpose(2, 0, 1)
    centred: Floats = filled - filled.mean(axis=1, keepdims=True)
    return centred


def repeated_in_turn(shocks: Floats, there: Bools) -> Floats:
    """Shocks (D, N, .) in which an entity's k-th missing date takes its k-th date that stands, and so round."""
    filled = shocks.copy()
    for i in range(there.shape[1]):
        own, missing = np.flatnonzero(there[:, i]), np.flatnonzero(~there[:, i])
        filled[missing, i] = filled[own[np.arange(len(missing)) % len(own)], i]
    return filled


def dated_shocks(null: Null) -> Floats:
    """Shocks on every row of the calendar (2, T, N), for draws that keep the dates in order.

    Each shock that stands is its own; a missing one is filled from the entity's own pairs as in `pooled_shocks`.
    """
    rows = np.arange(len(null.outcome))
    own = np.stack([null.outcome, null.signal])
    return np.where(np.isfinite(own), own, pooled_shocks(null, rows))


def _unpredicted(signal: Floats, outcomes: Floats, feed: Floats) -> Floats:
    """Outcomes less what the signal of the period before predicts, with mean zero (T, N)."""
    left = np.full_like(outcomes, np.nan)
    left[1:] = outcomes[1:] - feed * signal[:-1]
    centred: Floats = left - _column_means(left)
    return centred


def _persistence(signal: Floats, shocks: Floats, here: Bools) -> float:
    """AR(1) slope of one entity before it is capped; `here` (T-1,) marks the transitions in use."""
    before, after, shock = signal[:-1][here], signal[1:][here], shocks[1:][here]
    before, after, shock = before - before.mean(), after - after.mean(), shock - shock.mean()
    left = after - before * _slope(after, before)
    size = float(left @ left) * float(shock @ shock)
    explained = float(left @ shock) ** 2 / size if size > 0 else 0.0
    clean, target = (part - shock * _slope(part, shock) for part in (before, after))
    restricted = _slope(target, clean)
    return restricted + (1.0 - explained) * (1.0 + 3.0 * restricted) / len(before)


def _slope(y: Floats, x: Floats) -> float:
    squares = float(x @ x)
    return float(x @ y) / squares if squares > 0 else 0.0


def _column_means(values: Floats) -> Floats:
    """Means by entity over what stands (N,), NaN where nothing does."""
    there = np.isfinite(values)
    count = there.sum(axis=0)
    total = np.where(there, values, 0.0).sum(axis=0)
    means: Floats = np.divide(total, count, out=np.full(len(count), np.nan), where=count > 0)
    return means
