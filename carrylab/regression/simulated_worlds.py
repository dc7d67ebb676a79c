"""Worlds in which nothing predicts, fitted to a sample: simulated whole, dates and holes as in the data."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np
from scipy.sparse import csr_array

from carrylab.errors import InferenceError
from carrylab.regression.draws import Picks, Scheme, paths, picked
from carrylab.regression.draws_measure import window_sums
from carrylab.regression.draws_null import (
    FEWEST,
    Null,
    dated_shocks,
    fit_null,
    pooled_shocks,
    repeated_in_turn,
    shock_pool,
)
from carrylab.regression.sample import Floats, Ints, Sample
from carrylab.regression.simulated import Frame, Simulated


class World(Protocol):
    """What makes samples of one or more regressions at once, `size` numbers in the largest array of one sample."""

    @property
    def size(self) -> int:
        """Numbers in the largest array of one sample."""

    def simulate(self, stream: np.random.Generator, count: int) -> tuple[Simulated, ...]:
        """`count` samples of every regression, in which nothing predicts."""


@dataclass(frozen=True, eq=False, slots=True)
class OnePeriod:
    """x_{t+1} = c + phi x_t + v, y_{t+1} = mu + e, the leg the sum of y over its window, weighted.

    A slope of b adds kappa (x_t - mean) + mean/sum w to y_{t+1}, kappa = 1/sum_j w_j phi^(j-1), times b: over the
    horizon b x_t is expected. `shocks` (2, D, N) of outcome and signal; `premium` (2, N): kappa and mean/sum w.
    `by_period`: whether one-period outcomes are part of the sample.
    """

    null: Null
    shocks: Floats
    scheme: Scheme
    ahead: csr_array
    premium: Floats
    by_period: bool

    @property
    def size(self) -> int:
        """Numbers in one (T, N) array."""
        return self.null.outcome.size

    def simulate(self, stream: np.random.Generator, count: int) -> tuple[Simulated, ...]:
        """`count` samples."""
        picks = picked(stream, (len(self.null.outcome), count), self.shocks.shape[1], self.scheme)
        signal, news = paths(self.null, self.shocks, picks)
        slope, level = self.premium[:, :, None]
        added = np.zeros_like(news)
        added[1:] = slope * (signal[:-1] - self.null.mean[:, None]) + level
        both = np.stack([news, added])
        leg = np.stack([(self.ahead @ part.reshape(len(part), -1)).reshape(part.shape) for part in both])
        return (Simulated(signal, leg, (lambda _step: both) if self.by_period else None),)


def one_period_world(frame: Frame, signal: Floats, names: Sequence[str], scheme: Scheme) -> OnePeriod:
    """The null fitted to a signal (T, N) on all its dates and to the frame's one-period outcomes by period."""
    outcome = frame.sample.one_step[0]
    assert outcome is not None
    null = fit_null(signal, stand_ins(frame.sample), names)
    return _one_period(frame, null, null, scheme, outcome.weights, by_period=True)


def moving_average_world(frame: Frame, signal: Floats, names: Sequence[str], scheme: Scheme) -> OnePeriod:
    """A leg without one-period outcomes: a moving average of news as long as its windows, L = overlap + 1.

    The news of one period is a whole window's outcome, drawn together with the signal's shocks summed over the same
    window, both over the root of L: so the leg has the variance it has, autocorrelation 1 - l/L from overlap alone, and
    its correlation with the signal's shocks and across entities. Persistence is estimated with the outcome of the
    window that begins in the place of the one-period outcome. Our own construction.
    """
    sample = frame.sample
    length = sample.overlap + 1
    leg = np.where(sample.mask, sample.y[:, :, 0], np.nan)
    null = fit_null(signal, stand_ins(sample), names)
    windows = np.lib.stride_tricks.sliding_window_view(null.signal, length, axis=0).sum(axis=2)
    news = np.full_like(leg, np.nan)
    news[: len(windows) - 1] = windows[1:]
    pairs = replace(null, outcome=leg / length**0.5, signal=news / length**0.5)
    wide = replace(frame, sample=replace(sample, steps=np.where(sample.steps > 0, length, 0)))
    return _one_period(wide, null, pairs, scheme, np.ones(length), by_period=False)


def _one_period(
    frame: Frame, null: Null, pairs: Null, scheme: Scheme, weights: Floats, *, by_period: bool
) -> OnePeriod:
    """The world of a null whose shocks are drawn in `pairs`."""
    _require_pairs(pairs)
    shocks = pooled_shocks(pairs, shock_pool([pairs.pairs])) if scheme == "resampled" else dated_shocks(pairs)
    steps = frame.sample.steps
    used = weights[: int(np.median(steps[frame.mask.any(axis=1)]))]
    kept = (used * null.persistence[:, None] ** np.arange(len(used))).sum(axis=1)
    premium = np.stack([1.0 / kept, null.mean / used.sum()])
    return OnePeriod(null, shocks, scheme, window_sums(steps, weights), premium, by_period)


def _require_pairs(pairs: Null) -> None:
    """Every entity needs some dates whose shocks to signal and outcome both stand."""
    counts = pairs.pairs.sum(axis=0)
    short = np.flatnonzero(counts < FEWEST)
    if len(short):
        raise InferenceError(
            f"{pairs.names[short[0]]} has {counts[short[0]]} dates on which an outcome and the signal's shocks over "
            f"the same window stand, a simulation needs {FEWEST}; leave it out"
        )


@dataclass(frozen=True, eq=False, slots=True)
class BySteps:
    """As `OnePeriod`, with outcomes by origin and step: what falls into one period is drawn together.

    `news` (D, N, H): the shocks of step 1 to H that fall into a drawn date; a slope of one adds x_t over sum w to
    every step. `shocks` (2, D, N): of their mean over steps, and of the signal.
    """

    null: Null
    shocks: Floats
    news: Floats
    scheme: Scheme
    steps: Ints
    weights: Floats

    @property
    def size(self) -> int:
        """Numbers in the outcomes of one sample, (H, T, N)."""
        return self.null.outcome.size * len(self.weights)

    def simulate(self, stream: np.random.Generator, count: int) -> tuple[Simulated, ...]:
        """`count` samples."""
        picks = picked(stream, (len(self.null.outcome), count), self.shocks.shape[1], self.scheme)
        signal, _ = paths(self.null, self.shocks, picks)
        news = np.zeros((len(self.weights), *signal.shape))
        for i in range(signal.shape[1]):
            for step in range(1, len(news) + 1):
                news[step - 1, :-step, i] = _drawn(self.news[:, i, step - 1], picks[step:])
        leg = np.stack([np.zeros_like(signal), signal])
        for step, (weight, part) in enumerate(zip(self.weights, news, strict=True), start=1):
            leg[0] += weight * (self.steps >= step)[:, None, None] * part
        return (Simulated(signal, leg, lambda step: news[step - 1]),)


def by_steps_world(frame: Frame, signal: Floats, names: Sequence[str], scheme: Scheme) -> BySteps:
    """The null fitted to a signal (T, N) and to the frame's one-period outcomes by origin and step."""
    outcome = frame.sample.one_step[0]
    assert outcome is not None
    null = fit_null(signal, stand_ins(frame.sample), names)
    rows = shock_pool([null.pairs]) if scheme == "resampled" else np.arange(len(signal))
    shocks = pooled_shocks(null, rows) if scheme == "resampled" else dated_shocks(null)
    news = repeated_in_turn(_fallen(outcome.outcomes)[rows], null.pairs[rows])
    return BySteps(null, shocks, news - news.mean(axis=0), scheme, frame.sample.steps, outcome.weights)


def stand_ins(sample: Sample) -> Floats:
    """What goes for the one-period outcomes of a one-leg sample where persistence is estimated (T, N).

    The outcomes themselves; by origin and step the mean over the steps that fall into a period; where there are none,
    a period's share of the window's outcome that begins with it.
    """
    outcome = sample.one_step[0]
    if outcome is None:
        leg = np.where(sample.mask, sample.y[:, :, 0], np.nan)
        return np.vstack([np.full((1, leg.shape[1]), np.nan), leg[:-1] / (sample.overlap + 1)])
    return outcome.outcomes if outcome.outcomes.ndim == 2 else _fallen(outcome.outcomes).mean(axis=2)


def _fallen(outcomes: Floats) -> Floats:
    """Outcomes by origin and step (T, N, H) in the row in which they fall, each step with mean zero."""
    fallen = np.full_like(outcomes, np.nan)
    for step in range(1, outcomes.shape[2] + 1):
        fallen[step:, :, step - 1] = outcomes[:-step, :, step - 1]
    there = np.isfinite(fallen)
    total = np.where(there, fallen, 0.0).sum(axis=0)
    fallen -= total / np.maximum(there.sum(axis=0), 1)
    return fallen


def _drawn(table: Floats, picks: Picks) -> Floats:
    """Values (T, B) of one entity's shocks (D,) or, wild, of its dated ones, the last T of them."""
    return table[-len(picks) :, None] * picks if picks.dtype == np.float64 else np.ascontiguousarray(table)[picks]
