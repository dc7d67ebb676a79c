"""How far the nominal size can be trusted: predicted bias, predicted size, effective entities, independent windows."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr

from carrylab.regression.effects import absorb, blocks
from carrylab.regression.fit import Estimate
from carrylab.regression.sample import Bools, Floats, Ints, Sample

PERSISTENCE_CAP = 0.999
FEW_WINDOWS, VERY_FEW_WINDOWS = 20, 10
LARGE_BIAS = 0.3  # bias over standard error from which a nominal 5% test rejects 6% and more


@dataclass(frozen=True, slots=True)
class Bias:
    """Predicted small-sample bias of the signal's slope and what it does to a nominal 5% test.

    `persistence`: pooled AR(1) of the signal, bias-corrected; `capped` where it reached .999. `gamma`: slope of the
    leg's one-period shock on the signal's shock. `bias` of the slope, `ratio` bias over standard error, `size`
    predicted true size of the nominal two-sided 5% test. Where `problem` says why nothing can be predicted, all
    are NaN.
    """

    persistence: float
    capped: bool
    gamma: float
    bias: float
    ratio: float
    size: float
    problem: str = ""


NO_NEIGHBOURS = (
    "the signal never stands on two dates in a row, so neither its persistence nor the bias can be predicted"
)
UNKNOWN = Bias(math.nan, False, math.nan, math.nan, math.nan, math.nan, NO_NEIGHBOURS)


def predicted_size(ratio: float) -> float:
    """True size of a nominal two-sided 5% test shifted by bias over standard error: Phi(-1.96+r) + Phi(-1.96-r)."""
    return float(ndtr(-1.959963984540054 + ratio) + ndtr(-1.959963984540054 - ratio))


def window_warning(dates: int, overlap: int, kinds: Iterable[str]) -> tuple[str, ...]:
    """One sentence where few non-overlapping windows fit into the sample, K = T/h below 20."""
    windows = dates // (overlap + 1)
    if not overlap or windows >= FEW_WINDOWS:
        return ()
    text = f"{dates} dates hold only {windows} independent windows of {overlap + 1} periods"
    if windows < VERY_FEW_WINDOWS and set(kinds) & {"bartlett", "bartlett, fixed-b", "rectangular"}:
        text += "; kernel errors are far too small here, do not rely on their p-values"
    return (text,)


def effective_entities(sample: Sample, estimate: Estimate, leg: int) -> float:
    """Number of independent, equally large entities that would give the same precision, at most N.

    (sum_i sd_i)^2 / Var(sum_i q_i), sd_i^2 = sum_t q_it^2 and Var = sum_t (sum_i q_it)^2 with q_it the scores of the
    signal: N for N alike and independent entities, 1 where all move together.
    """
    scores = _signal_scores(sample, estimate, leg)
    together = float((scores.sum(axis=1) ** 2).sum())
    apart = float(np.sqrt((scores**2).sum(axis=0)).sum() ** 2)
    return min(apart / together, float(estimate.n_entities)) if together > 0 else float(estimate.n_entities)


def predicted_bias(sample: Sample, estimate: Estimate, leg: int, std_error: float) -> Bias:
    """Plug-in bias of the signal's slope when its shocks move with the outcome's.

    Over h one-period steps: bias = -gamma [c h (1 + phi) + (2 / N_e) sum_{j=1..h} phi^j] / T, T the mean number of
    dates of an entity, N_e the effective number of entities, c = 1 with entity effects (each entity estimates its
    own mean) and 1 / N_e without. One entity and h = 1 give -gamma (1 + 3 phi) / T. Controls are left aside.
    Source: Stambaugh (1999, JFE 54:375); Kendall (1954, Biometrika 41:403); Nickell (1981) for many entities. The
    pooled and the h-step forms are our own first-order expansions.
    """
    signal, rows = _signal(sample, estimate)
    length = estimate.n_obs / estimate.n_entities
    entities = effective_entities(sample, estimate, leg)
    mean_share = 1.0 if estimate.effects in ("entity", "both") else 1.0 / entities
    lagged = rows[1:] & rows[:-1]
    if not lagged.any():
        return UNKNOWN
    raw = float((signal[1:] * signal[:-1])[lagged].sum() / (signal[:-1] ** 2)[lagged].sum())
    corrected = raw + (mean_share * (1 + raw) + 2 * raw / entities) / length
    phi = min(corrected, PERSISTENCE_CAP)
    shocks = np.where(lagged, signal[1:] - phi * signal[:-1], np.nan)
    gamma = _gamma(sample, estimate, leg, shocks)
    steps = int(np.median(sample.steps[rows.any(axis=1)]))
    bias = -gamma * (mean_share * steps * (1 + phi) + 2 / entities * (phi ** np.arange(1, steps + 1)).sum()) / length
    ratio = bias / std_error if std_error > 0 else math.nan
    return Bias(phi, corrected > PERSISTENCE_CAP, gamma, bias, ratio, predicted_size(ratio))


def _signal(sample: Sample, estimate: Estimate) -> tuple[Floats, Bools]:
    """The signal after the effects are out (T, N), and the rows in use."""
    rows: Bools = sample.mask & (estimate.weights > 0)[:, None]
    signal = sample.x[:, :, 0] - estimate.absorbed.entity[:, 0] - estimate.absorbed.date[:, :1]
    return signal * rows, rows


def _signal_scores(sample: Sample, estimate: Estimate, leg: int) -> Floats:
    """Each row's part in the influence of the signal's slope (T, N)."""
    k = len(estimate.means)
    scores = np.zeros(sample.mask.shape)
    for dates, x, y in blocks(sample, estimate.absorbed, estimate.weights):
        errors = y[:, :, leg] - x @ estimate.coefficients[:k, leg]
        scores[dates] = (x @ estimate.bread[:k, 0]) * errors * estimate.weights[dates, None]
    return scores


def _gamma(sample: Sample, estimate: Estimate, leg: int, shocks: Floats) -> float:
    """Slope of the leg's one-period shock on the signal's; `shocks` (T-1, N) stand in the row before they fall.

    From one-period outcomes where they exist, else from the leg's residual on the sum of shocks in its window.
    """
    outcome = sample.one_step[leg]
    if outcome is None:
        return _slope(_residual(sample, estimate, leg)[:-1], _windowed(shocks, sample.steps))
    one = outcome.outcomes[:-1, :, 0] if outcome.outcomes.ndim == 3 else outcome.outcomes[1:]
    return float(outcome.weights.mean()) * _slope(one, shocks)


def _windowed(shocks: Floats, steps: Ints) -> Floats:
    """Sum of the shocks that fall inside the window of each origin, NaN where one is missing."""
    total = np.zeros_like(shocks)
    for step in range(int(steps.max())):
        inside = (steps > step)[: len(shocks), None]
        ahead = np.full_like(shocks, np.nan)
        ahead[: len(shocks) - step] = shocks[step:]
        total += np.where(inside, ahead, 0.0)
    return total


def _residual(sample: Sample, estimate: Estimate, leg: int) -> Floats:
    k = len(estimate.means)
    residual = np.full(sample.mask.shape, np.nan)
    for dates, x, y in blocks(sample, estimate.absorbed, estimate.weights):
        errors = y[:, :, leg] - x @ estimate.coefficients[:k, leg]
        residual[dates] = np.where(sample.mask[dates], errors, np.nan)
    return residual


def _slope(outcome: Floats, shock: Floats) -> float:
    """Least-squares slope over the rows where both stand, entity means taken out."""
    both = np.isfinite(outcome) & np.isfinite(shock)
    pair = np.where(both[:, :, None], np.stack([outcome, shock], axis=2), 0.0)
    means = absorb((pair,), both, np.ones(len(both)), "entity").entity
    u, v = np.moveaxis((pair - means) * both[:, :, None], 2, 0)
    squares = float((v**2).sum())
    return float((u * v).sum()) / squares if squares > 0 else 0.0
