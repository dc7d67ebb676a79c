"""Half-panel jackknife: slopes from which most of the small-sample bias is taken by two halves of the sample."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from carrylab.errors import SampleError
from carrylab.regression.fit import Estimate, fit
from carrylab.regression.one_period import NullInfluence, null_influence
from carrylab.regression.sample import Bools, Floats, Sample


@dataclass(frozen=True, eq=False, slots=True)
class HalfPanel:
    """Jackknifed coefficients (K+1, L) and what their variance is made of.

    `influence` (T, K+1, L): date scores of the linear weights times the residuals, for cosines or a kernel.
    `loads` (T, N, K): weights that turn outcomes into slopes, b_J = sum_t w_t sum_i load_it Y_it with the date
    weights w. `estimate`: the whole-sample fit.
    """

    coefficients: Floats
    influence: Floats
    loads: Floats
    estimate: Estimate


def half_panel(sample: Sample, estimate: Estimate) -> HalfPanel:
    """Jackknife the fit: b_J = 2 b - (b_1 + b_2) / 2.

    Each entity's own used dates are split in two (the earlier half the smaller where the number is odd) and effects
    are estimated anew in each half. It is linear in the outcomes, load = 2 A^-1 xd - (A_1^-1 xd_1 + A_2^-1 xd_2) / 2,
    so date t adds w_t sum_i load_it e_it, e the residuals at b_J after the whole sample's effects.
    Raises SampleError where a half cannot carry the regression.
    Source: Dhaene and Jochmans (2015, REStud 82:991); Chudik, Pesaran and Yang (2018, J. Appl. Econometrics 33:816);
    the variance from linear weights is our own.
    """
    k = len(sample.terms)
    loads, slopes = 2.0 * _loads(sample, estimate), 2.0 * estimate.coefficients[:k]
    for half in _halves(sample, estimate):
        part = _fit_half(half, estimate)
        loads -= 0.5 * _loads(half, part)
        slopes = slopes - 0.5 * part.coefficients[:k]
    means_y = estimate.coefficients[k] + estimate.means @ estimate.coefficients[:k]
    return HalfPanel(
        coefficients=np.vstack([slopes, means_y - estimate.means @ slopes]),
        influence=_influence(sample, estimate, loads, slopes),
        loads=loads,
        estimate=estimate,
    )


def half_panel_null(sample: Sample, found: HalfPanel, leg: int) -> NullInfluence:
    """Influence series of one leg's jackknifed coefficients under the null of no premium.

    sum_i u_{i,tau} W_{i,tau}, W_tau the sum of the loads over the used origins whose window covers tau and u the
    one-period outcomes after their own effects: Hodrick's 1B scores carried by the loads. Our own combination.
    """
    estimate, k = found.estimate, len(sample.terms)
    bread = np.zeros_like(estimate.bread)
    bread[:k, :k] = np.eye(k)
    nothing = replace(
        estimate.absorbed,
        entity=np.zeros_like(estimate.absorbed.entity),
        date=np.zeros_like(estimate.absorbed.date),
    )
    return null_influence(replace(sample, x=found.loads), replace(estimate, absorbed=nothing, bread=bread), leg)


def _halves(sample: Sample, estimate: Estimate) -> tuple[Sample, Sample]:
    used: Bools = sample.mask & (estimate.weights > 0)[:, None]
    first = used & (2 * np.cumsum(used, axis=0) <= used.sum(axis=0))
    return _only(sample, first, "first half"), _only(sample, used & ~first, "second half")


def _only(sample: Sample, rows: Bools, name: str) -> Sample:
    label = f"{sample.label}, {name}" if sample.label else name
    return replace(sample, x=sample.x * rows[:, :, None], y=sample.y * rows[:, :, None], mask=rows, label=label)


def _fit_half(half: Sample, estimate: Estimate) -> Estimate:
    try:
        return fit(half, effects=estimate.effects, weights=estimate.weights)
    except SampleError as problem:
        raise SampleError(f"half-panel jackknife: {problem}") from problem


def _loads(sample: Sample, estimate: Estimate) -> Floats:
    """Weights (T, N, K) of the outcomes in the slopes, date weights left out."""
    k = len(estimate.means)
    terms = sample.x - estimate.absorbed.entity[:, :k] - estimate.absorbed.date[:, None, :k]
    loads: Floats = (terms * sample.mask[:, :, None]) @ estimate.bread[:k, :k]
    return loads


def _influence(sample: Sample, estimate: Estimate, loads: Floats, slopes: Floats) -> Floats:
    k, w = len(estimate.means), estimate.weights
    terms = sample.x - estimate.absorbed.entity[:, :k] - estimate.absorbed.date[:, None, :k]
    outcomes = sample.y - estimate.absorbed.entity[:, k:] - estimate.absorbed.date[:, None, k:]
    errors = (outcomes - terms @ slopes) * sample.mask[:, :, None] * w[:, None, None]
    of_slopes = np.einsum("tik,til->tkl", loads, errors)
    of_const = errors.sum(axis=1) / estimate.total - np.einsum("k,tkl->tl", estimate.means, of_slopes)
    return np.concatenate([of_slopes, of_const[:, None]], axis=1)
