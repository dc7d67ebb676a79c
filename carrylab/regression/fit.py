"""Least squares of all legs on the same signal and controls, and the influence series that carries all inference."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_factor, cho_solve

from carrylab.errors import SampleError
from carrylab.regression.effects import Absorbed, Effects, absorb, blocks
from carrylab.regression.sample import Floats, Sample

ROUNDING = 1e-22  # a variance below this part of the mean square is rounding left by taking the effects out
COLLINEAR = 1e-12  # a term with less than this part of its variance unexplained by the terms before it


@dataclass(frozen=True, eq=False, slots=True)
class Estimate:
    """Slopes of all legs on the same terms, with what inference needs.

    `terms` are the sample's K terms and "const", the grand mean of y - x b. `coefficients` (K+1, L).
    `influence` (T, K+1, L): each date's contribution to the estimation error, before any finite-sample factor;
    zero on unused dates. `r2` (L,): within where there are effects, centred where there are none; NaN for a leg
    that does not vary. `bread` (K+1, K+1): inverse of the weighted moments of terms and constant. `squares`
    (L, L): weighted cross products of the residuals. `weights` (T,) as used, `total` their sum over rows.
    `means` (K,): weighted grand means of the terms. `absorbed`: what the effects subtract. `n_obs` rows of
    positive weight. `parameters` counts slopes, constant and absorbed effects. `first` and `last` are the
    outermost used rows.
    """

    terms: tuple[str, ...]
    legs: tuple[str, ...]
    effects: Effects
    coefficients: Floats
    influence: Floats
    r2: Floats
    bread: Floats
    squares: Floats
    weights: Floats
    total: float
    means: Floats
    absorbed: Absorbed
    n_obs: int
    n_dates: int
    n_entities: int
    parameters: int
    first: int
    last: int


@dataclass(frozen=True, eq=False, slots=True)
class Moments:
    """Per-date sums over entities of the rows after the effects are out, unweighted.

    `xx` (T, K, K), `xy` (T, K, L), `x` (T, K), `y` (T, L), and `yy` (L, L) weighted over all dates.
    """

    xx: Floats
    xy: Floats
    x: Floats
    y: Floats
    yy: Floats


def fit(sample: Sample, *, effects: Effects, weights: Floats | None = None) -> Estimate:
    """Regress every leg on the sample's terms.

    With x~ and y~ the rows after the effects are out: b = A^-1 sum w x~ y~, A = sum w x~ x~', influence of date t
    A^-1 w_t sum_i x~_it e_it; for the constant w_t sum_i e_it / sum w - means' (influence of b), which without
    effects is exactly ordinary least squares (Frisch and Waugh 1933) and with effects holds the effects fixed.
    `weights` (T,) are non-negative date weights: a subsample, a window or bootstrap counts; None means one.
    Raises SampleError, one line, where the sample cannot carry the regression.
    """
    weights = np.ones(len(sample.mask)) if weights is None else np.asarray(weights, dtype=np.float64)
    rows = sample.mask & (weights > 0)[:, None]
    n_obs, used = int(rows.sum()), np.flatnonzero(rows.any(axis=1))
    _require_rows(sample, n_obs)
    absorbed = absorb((sample.x, sample.y), sample.mask, weights, effects)
    parameters = len(sample.terms) + absorbed.count
    _require_more_rows_than_parameters(sample, n_obs, parameters)
    solved = _solve(sample, effects, absorbed, weights)
    return Estimate(
        terms=(*sample.terms, "const"),
        legs=sample.legs,
        effects=effects,
        coefficients=solved.coefficients,
        influence=solved.influence,
        r2=solved.r2,
        bread=solved.bread,
        squares=solved.squares,
        weights=weights,
        total=solved.total,
        means=solved.means,
        absorbed=absorbed,
        n_obs=n_obs,
        n_dates=len(used),
        n_entities=int(rows.any(axis=0).sum()),
        parameters=parameters,
        first=int(used[0]),
        last=int(used[-1]),
    )


def date_moments(sample: Sample, absorbed: Absorbed, weights: Floats) -> Moments:
    """Per-date moments of the rows after the effects are out, in one pass over blocks of dates."""
    dates, k, legs = len(sample.mask), sample.x.shape[2], sample.y.shape[2]
    xx, xy = np.zeros((dates, k, k)), np.zeros((dates, k, legs))
    sum_x, sum_y = np.zeros((dates, k)), np.zeros((dates, legs))
    yy = np.zeros((legs, legs))
    for part, x, y in blocks(sample, absorbed, weights):
        turned = x.transpose(0, 2, 1)
        xx[part], xy[part] = turned @ x, turned @ y
        sum_x[part], sum_y[part] = x.sum(axis=1), y.sum(axis=1)
        flat = y.reshape(-1, legs)
        yy += flat.T @ (flat * np.repeat(weights[part], y.shape[1])[:, None])
    return Moments(xx, xy, sum_x, sum_y, yy)


@dataclass(frozen=True, eq=False, slots=True)
class _Solved:
    coefficients: Floats
    influence: Floats
    r2: Floats
    bread: Floats
    squares: Floats
    total: float
    means: Floats


def _solve(sample: Sample, effects: Effects, absorbed: Absorbed, weights: Floats) -> _Solved:
    moments = date_moments(sample, absorbed, weights)
    inside = np.tensordot(weights, moments.xx, axes=1)
    _require_variation(sample, inside / weights.sum(), effects)
    inverse = cho_solve(cho_factor(inside), np.eye(len(inside)))
    slopes = inverse @ np.tensordot(weights, moments.xy, axes=1)
    total = float(sample.mask.sum(axis=1) @ weights)
    means = np.tensordot(weights, sample.x.sum(axis=1), axes=1) / total
    means_y = np.tensordot(weights, sample.y.sum(axis=1), axes=1) / total
    bread = np.block([[inverse, -(inverse @ means)[:, None]], [-(means @ inverse)[None], np.full((1, 1), 1.0 / total)]])
    bread[-1, -1] += means @ inverse @ means
    squares = moments.yy - slopes.T @ inside @ slopes
    return _Solved(
        coefficients=np.vstack([slopes, means_y - means @ slopes]),
        influence=_influence(moments, weights, slopes, inverse, means, total),
        r2=_explained(np.diag(squares), np.diag(moments.yy)),
        bread=bread,
        squares=squares,
        total=total,
        means=means,
    )


def _influence(
    moments: Moments, weights: Floats, slopes: Floats, inverse: Floats, means: Floats, total: float
) -> Floats:
    scores = weights[:, None, None] * (moments.xy - moments.xx @ slopes)
    errors = weights[:, None] * (moments.y - moments.x @ slopes)
    of_slopes = inverse @ scores
    of_const = errors / total - np.einsum("k,tkl->tl", means, of_slopes)
    return np.concatenate([of_slopes, of_const[:, None]], axis=1)


def _explained(rest: Floats, all_squares: Floats) -> Floats:
    """R2 = 1 - rest / all; NaN for a leg that does not vary, of which there is nothing to explain."""
    return 1.0 - np.divide(rest, all_squares, out=np.full_like(rest, np.nan), where=all_squares > 0)


def _where(sample: Sample) -> str:
    return f"{sample.label}: " if sample.label else ""


def _require_rows(sample: Sample, n_obs: int) -> None:
    if n_obs > 1:
        return
    names = (*sample.terms, *sample.legs)
    empty = [name for name, count in zip(names, sample.standing.sum(axis=0), strict=True) if not count]
    if empty:
        what = f"'{empty[0]}' has no value at all; give it data or leave it out"
    elif n_obs == 1:
        what = "only one observation is left, at least three are needed; widen the dates or leave the group out"
    else:
        what = "no row in which the signal, every control and every leg stand; check that their dates and codes meet"
    raise SampleError(_where(sample) + what)


def _require_more_rows_than_parameters(sample: Sample, n_obs: int, parameters: int) -> None:
    if n_obs <= parameters:
        raise SampleError(
            f"{_where(sample)}{n_obs} rows cannot carry {parameters} parameters (slopes, constant and effects); "
            "widen the dates, drop a control or choose fewer effects"
        )


def _require_variation(sample: Sample, inside: Floats, effects: Effects) -> None:
    """Refuse a term that does not vary, or that the terms before it explain: each named."""
    size = np.einsum("tik,tik->k", sample.x, sample.x) / len(sample.mask)
    within = "" if effects == "none" else f" once the {effects} effects are out"
    if effects == "both":
        within = " once entity and time effects are out"
    left = inside.copy()
    for k, name in enumerate(sample.terms):
        if inside[k, k] <= ROUNDING * size[k]:
            raise SampleError(f"{_where(sample)}'{name}' does not vary{within}; it has no slope to estimate")
        if left[k, k] <= COLLINEAR * inside[k, k]:
            others = ", ".join(sample.terms[:k])
            raise SampleError(f"{_where(sample)}'{name}' is explained exactly by {others}{within}; drop one of them")
        left = left - np.outer(left[:, k], left[k]) / left[k, k]
