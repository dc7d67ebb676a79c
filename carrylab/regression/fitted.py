"""Fitted values of a leg at given terms, with the date series of their estimation error."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from carrylab.regression.fit import Estimate
from carrylab.regression.sample import Floats, Sample


@dataclass(frozen=True, eq=False, slots=True)
class Fitted:
    """Fitted values (N,) and the influence of each date on them, (T, N); NaN and zero where an entity is unused."""

    values: Floats
    influence: Floats


def fitted(sample: Sample, estimate: Estimate, leg: int, terms: Floats) -> Fitted:
    """What the regression of one leg says at `terms` (N, K), entity by entity, without time effects.

    value_i = ybar_i + (x_i - xbar_i)'b, with means over the entity (over the whole sample without effects).
    Its error is the mean residual error of the entity plus (x_i - xbar_i)' (b - beta), so its date series is
    w_t e_it / sum_t w_t + (x_i - xbar_i)' influence of b.
    """
    K = terms.shape[1]
    slopes = estimate.coefficients[:K, leg]
    centre, level = estimate.absorbed.entity[:, :K], estimate.absorbed.entity[:, K + leg]
    deviation = terms - centre
    residual = (sample.y[:, :, leg] - level - (sample.x - centre) @ slopes) * sample.mask
    weighted = residual * estimate.weights[:, None]
    size = sample.mask.T @ estimate.weights
    if estimate.effects == "none":
        weighted = np.repeat(weighted.sum(axis=1, keepdims=True), len(size), axis=1)
        size = np.full_like(size, size.sum())
    used = size > 0
    own = weighted / np.where(used, size, 1.0)
    series = (own + estimate.influence[:, :K, leg] @ deviation.T) * used
    return Fitted(np.where(used, level + deviation @ slopes, np.nan), np.nan_to_num(series))
