"""Errors imposed under the null of no premium: the overlap moves from the outcome to the signal."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.effects import BLOCK, Effects, absorb
from carrylab.regression.fit import Estimate
from carrylab.regression.sample import Bools, Floats, Ints, OneStep, Sample

MISSING_SHARE = 0.05  # of the one-period outcomes inside the windows; beyond it the series is refused


@dataclass(frozen=True, eq=False, slots=True)
class NullInfluence:
    """An influence series under the null. `series` (T, K+1), row tau: the period in which the outcome falls.

    `missing` of `covered` one-period outcomes inside the windows had no value and count as zero.
    """

    series: Floats
    missing: int
    covered: int


def null_influence(sample: Sample, estimate: Estimate, leg: int) -> NullInfluence:
    """Influence of one leg's coefficients when nothing but one-period innovations moves it (Hodrick 1992, 1B).

    sum_t xd_t Y_t = sum_tau y_tau W_tau, W_tau = sum of xd_t over the used origins whose window covers tau, cut at
    both edges; with u the outcomes after the effects are out, influence of tau = A^-1 sum_i u_{i,tau} W_{i,tau}.
    Outcomes by origin and step (T, N, H): the score of tau is sum_i sum_s weight_s xd_{i,tau-s} u_{i,tau-s,s}.
    No lag and no bandwidth: its covariance is the long-run sum of kind "date".
    Source: Hodrick (1992, RFS 5:357); summed over entities by date it is our own panel form.
    """
    outcome = sample.one_step[leg]
    if outcome is None:
        raise InferenceError(f"leg '{sample.legs[leg]}' has no one-period outcomes; choose cosine or bartlett errors")
    form = _by_step if outcome.outcomes.ndim == 3 else _by_period
    rows = form(sample, estimate, outcome)
    if rows.missing > MISSING_SHARE * rows.covered:
        raise InferenceError(
            f"leg '{sample.legs[leg]}': {rows.missing} of {rows.covered} one-period outcomes inside the windows are "
            "missing, at most one in 20 may be; choose cosine or bartlett errors"
        )
    return NullInfluence(rows.series @ scores_to_influence(estimate).T, rows.missing, rows.covered)


def carried_terms(sample: Sample, estimate: Estimate, columns: slice = slice(None)) -> Floats:
    """What each outcome is weighted with: the terms after the effects are out and a one, times the date weight.

    (T, n, K+1) for the entities in `columns`, zero in unused rows.
    """
    k, mask = len(sample.terms), sample.mask[:, columns]
    carried = np.ones((*mask.shape, k + 1))
    carried[:, :, :k] = sample.x[:, columns]
    carried[:, :, :k] -= estimate.absorbed.entity[columns, :k]
    carried[:, :, :k] -= estimate.absorbed.date[:, None, :k]
    carried *= (mask * estimate.weights[:, None])[:, :, None]
    return carried


def scores_to_influence(estimate: Estimate) -> Floats:
    """The matrix (K+1, K+1) that turns scores of [terms after effects, one] into influence."""
    k = len(estimate.means)
    inverse = estimate.bread[:k, :k]
    below = np.append(-(estimate.means @ inverse), 1.0 / estimate.total)
    return np.vstack([np.hstack([inverse, np.zeros((k, 1))]), below])


def _by_period(sample: Sample, estimate: Estimate, outcome: OneStep) -> NullInfluence:
    """Scores from outcomes that stand in the period in which they fall."""
    used = sample.mask & (estimate.weights > 0)[:, None]
    weights = outcome.weights[: len(used) - 1]
    covered = np.zeros_like(used)
    for step in range(1, len(weights) + 1):
        covered[step:] |= used[:-step] & (sample.steps >= step)[:-step, None]
    shocks, missing = _shocks(outcome.outcomes, covered, estimate.effects)
    scores = np.zeros((len(used), len(estimate.terms)))
    width = max(1, BLOCK // (len(used) * len(estimate.terms)))
    for start in range(0, used.shape[1], width):
        columns = slice(start, start + width)
        carried = carried_terms(sample, estimate, columns)
        scores += np.einsum("ti,tik->tk", shocks[:, columns], _moved(carried, weights, sample.steps))
    return NullInfluence(scores, missing, int(covered.sum()))


def _moved(carried: Floats, weights: Floats, steps: Ints) -> Floats:
    """W (T, n, K+1): what is carried at the origins whose window covers each period."""
    moved = np.zeros_like(carried)
    for step, weight in enumerate(weights, start=1):
        reaches = weight * (steps >= step)[:-step]
        moved[step:] += carried[:-step] * reaches[:, None, None]
    return moved


def _by_step(sample: Sample, estimate: Estimate, outcome: OneStep) -> NullInfluence:
    """Scores from outcomes by origin and step: each falls `step` periods after its origin."""
    carried = carried_terms(sample, estimate)
    total = np.zeros((len(carried), len(estimate.terms)))
    missing = covered = 0
    for step, weight in enumerate(outcome.weights[: len(carried) - 1], start=1):
        origins = (carried[:, :, -1] > 0) & (sample.steps >= step)[:, None]
        shocks, holes = _shocks(outcome.outcomes[:, :, step - 1], origins, estimate.effects)
        total[step:] += weight * np.einsum("ti,tik->tk", shocks[:-step], carried[:-step])
        missing, covered = missing + holes, covered + int(origins.sum())
    return NullInfluence(total, missing, covered)


def _shocks(outcomes: Floats, covered: Bools, effects: Effects) -> tuple[Floats, int]:
    """Outcomes (T, N) less their own effects over the covered cells, zero elsewhere; and how many are missing."""
    there = covered & np.isfinite(outcomes)
    shocks = np.where(there, outcomes, 0.0)
    absorbed = absorb((shocks[:, :, None],), there, np.ones(len(there)), effects)
    shocks -= absorbed.entity[:, 0]
    shocks -= absorbed.date
    shocks *= there
    return shocks, int(covered.sum() - there.sum())
