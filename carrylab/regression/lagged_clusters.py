"""Two-way clustering with lags of common shocks: for comparison with papers, not a headline under overlap."""

from __future__ import annotations

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.clusters import Clustered, ClusterFactor, cluster_factor, counted_parameters, meats
from carrylab.regression.effects import BLOCK
from carrylab.regression.fit import Estimate
from carrylab.regression.longrun import kernel_sum
from carrylab.regression.one_period import carried_terms, scores_to_influence
from carrylab.regression.sample import Floats, Sample


def clustered_lagged(sample: Sample, estimate: Estimate, lags: int, factor: ClusterFactor) -> Clustered:
    """Covariance clustered by entity and by date, common shocks lasting `lags` periods.

    V = c_E V_entity + c_D [V_date + sum_{l=1..L} (G_l + G_l')] - c_W [V_row + sum_{l=1..L} sum_i (g_il + g_il')],
    G_l = sum_t s_t s_{t-l}' of the dates' influence, g_il = sum_t q_it q_{i,t-l}' of one entity's, which V_entity
    already holds. The factors c are those of `clustered`; putting the lags under the factor of the block they belong
    to is ours. With no lags it is two-way clustering. Lags count on the calendar, holes are zeros.
    A variance that is not positive is replaced, with its row and column, by the larger of V_entity and the dates' sum
    with Bartlett weights at the same lag, and `problem` says so.
    Returns covariance (m, m), m = (K+1) L. Raises InferenceError with fewer than two clusters.
    Source: Thompson (2011, JFE 99:1).
    """
    n, k = estimate.n_obs, counted_parameters(estimate, "both")
    smallest = min(estimate.n_entities, estimate.n_dates)
    if smallest < 2:
        raise InferenceError(
            f"clustered: both, lagged needs at least two clusters and there is {smallest}; choose another kind"
        )

    def scale(groups: int) -> float:
        return cluster_factor(factor, n, k, groups if factor == "clusters" else smallest)

    by_date = estimate.influence.reshape(len(sample.mask), -1)
    by_entity = meats(sample, estimate).entity * scale(estimate.n_entities)
    common = kernel_sum(by_date, "rectangular", lags) * scale(estimate.n_dates)
    covariance = by_entity + common - _own(sample, estimate, lags) * scale(n)
    weighted = kernel_sum(by_date, "bartlett", lags) * scale(estimate.n_dates)
    covariance, problem = _mended(covariance, by_entity, weighted, estimate, lags)
    return Clustered(covariance, smallest, problem)


def _mended(
    covariance: Floats, by_entity: Floats, by_date: Floats, estimate: Estimate, lags: int
) -> tuple[Floats, str]:
    """The covariance with the larger one-way rows and columns where a variance is not positive, and that in words."""
    failed = np.diag(covariance) <= 0
    if not failed.any():
        return covariance, ""
    larger = by_date if np.trace(by_date[failed][:, failed]) > np.trace(by_entity[failed][:, failed]) else by_entity
    name = "by date with Bartlett weights at the same lag" if larger is by_date else "by entity"
    names = [f"{term} of {leg}" for term in estimate.terms for leg in estimate.legs]
    said = ", ".join(name for name, gone in zip(names, failed, strict=True) if gone)
    return np.where(failed | failed[:, None], larger, covariance), (
        f"the two-way variance with {lags} lags of common shocks is not positive for {said}; the larger one-way "
        f"variance, {name}, stands in its place"
    )


def _own(sample: Sample, estimate: Estimate, lags: int) -> Floats:
    """Rectangular sums of each entity's own influence, added over entities (m, m), some entities at a time."""
    dates, size = len(sample.mask), estimate.coefficients.size
    total = np.zeros((size, size))
    width = max(1, BLOCK // (dates * size))
    for start in range(0, sample.mask.shape[1], width):
        rows = _rows(sample, estimate, slice(start, start + width))
        for entity in range(rows.shape[1]):
            total += kernel_sum(rows[:, entity], "rectangular", lags)
    return total


def _rows(sample: Sample, estimate: Estimate, columns: slice) -> Floats:
    """Influence of single rows (T, n, m) of the entities in `columns`."""
    k = len(estimate.means)
    carried = carried_terms(sample, estimate, columns)
    outcomes = sample.y[:, columns] - estimate.absorbed.entity[columns, k:] - estimate.absorbed.date[:, None, k:]
    terms = sample.x[:, columns] - estimate.absorbed.entity[columns, :k] - estimate.absorbed.date[:, None, :k]
    errors = outcomes - terms @ estimate.coefficients[:k]
    moved = carried @ scores_to_influence(estimate).T
    rows: Floats = (moved[:, :, :, None] * errors[:, :, None, :]).reshape(*carried.shape[:2], -1)
    return rows
