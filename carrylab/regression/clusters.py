"""Covariances from single rows: classical, heteroskedasticity-robust and clustered. For comparison, not for overlap."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.effects import blocks
from carrylab.regression.fit import Estimate
from carrylab.regression.sample import Floats, Sample

CANCELLED = 1e-16  # part of the variance by row below which a clustered variance is rounding
By = Literal["entity", "date", "both"]
ClusterFactor = Literal["none", "n/(n-k)", "clusters", "clusters, one factor"]


@dataclass(frozen=True, eq=False, slots=True)
class Meats:
    """Sums of outer products of influence, terms x legs flattened (m = (K+1) L): by row, by entity, by date, (m, m)."""

    row: Floats
    entity: Floats
    date: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Clustered:
    """A clustered covariance (m, m), the number of clusters its t-law rests on, and what was replaced, in words."""

    covariance: Floats
    clusters: int
    problem: str


def classical(estimate: Estimate) -> Floats:
    """Covariance (m, m) with equal, uncorrelated errors: sum w e e' / n times the bread, before the factor n/(n-k)."""
    return np.asarray(np.kron(estimate.bread, estimate.squares / estimate.n_obs), dtype=np.float64)


def meats(sample: Sample, estimate: Estimate) -> Meats:
    """Sum the rows' influence by row, entity and date, a block of dates at a time."""
    k = len(estimate.means)
    size = estimate.coefficients.size
    row, entity = np.zeros((size, size)), np.zeros((sample.mask.shape[1], size))
    inverse, slopes = estimate.bread[:k, :k], estimate.coefficients[:k]
    for dates, x, y in blocks(sample, estimate.absorbed, estimate.weights):
        errors = (y - x @ slopes) * estimate.weights[dates, None, None]
        moved = x @ inverse
        const = sample.mask[dates] / estimate.total - moved @ estimate.means
        rows = np.concatenate([moved, const[:, :, None]], axis=2)[:, :, :, None] * errors[:, :, None, :]
        flat = rows.reshape(-1, size)
        row += flat.T @ flat
        entity += rows.reshape(len(rows), -1, size).sum(axis=0)
    by_date = estimate.influence.reshape(-1, size)
    return Meats(row, entity.T @ entity, by_date.T @ by_date)


def clustered(sample: Sample, estimate: Estimate, by: By, factor: ClusterFactor) -> Clustered:
    """Covariance clustered by entity, by date, or by both: V = V_entity + V_date - V_row.

    factor: none; n/(n-k); "clusters": each block its own G/(G-1) (n-1)/(n-k); "clusters, one factor": one factor
    with the smaller G. k counts the absorbed effects that are not nested in the clusters. A two-way variance that
    is not positive is replaced by the larger of the two one-way covariances, and `problem` says so.
    Source: Cameron, Gelbach and Miller (2011, JBES 29:238); Thompson (2011, JFE 99:1); Petersen (2009, RFS 22:435).
    """
    sums = meats(sample, estimate)
    n, k = estimate.n_obs, counted_parameters(estimate, by)
    sizes = {"entity": estimate.n_entities, "date": estimate.n_dates, "row": n}
    smallest = min(sizes[name] for name in (("entity", "date") if by == "both" else (by,)))
    if smallest < 2:
        raise InferenceError(
            f"clustered: {by} needs at least two clusters and there is {smallest}; choose another kind"
        )

    _require_variance(sums, by, smallest)

    def scale(name: str) -> float:
        return cluster_factor(factor, n, k, sizes[name] if factor == "clusters" else smallest)

    if by == "entity":
        return Clustered(sums.entity * scale("entity"), smallest, "")
    if by == "date":
        return Clustered(sums.date * scale("date"), smallest, "")
    return _both(sums.entity * scale("entity"), sums.date * scale("date"), sums.row * scale("row"), smallest)


def _require_variance(sums: Meats, by: By, clusters: int) -> None:
    """Refuse one-way clusters whose scores cancel, as those of two entities do under time effects."""
    summed = {"entity": sums.entity, "date": sums.date, "both": sums.row}[by]
    if (np.diag(summed) < CANCELLED * np.diag(sums.row)).any():
        raise InferenceError(
            f"clustered: {by} leaves no variance: under these effects the scores of {clusters} clusters cancel; choose "
            "another kind or other effects"
        )


def counted_parameters(estimate: Estimate, by: By) -> int:
    """Slopes and constant, and the absorbed effects that are not nested in the clusters."""
    nested = (estimate.effects, by) in {("entity", "entity"), ("time", "date")}
    return len(estimate.terms) if nested else estimate.parameters


def cluster_factor(factor: ClusterFactor, n: int, k: int, groups: int) -> float:
    """Finite-sample factor of one block of `groups` clusters."""
    if factor == "none":
        return 1.0
    if factor == "n/(n-k)":
        return n / (n - k)
    return groups / (groups - 1) * (n - 1) / (n - k)


def _both(by_entity: Floats, by_date: Floats, by_row: Floats, clusters: int) -> Clustered:
    covariance = by_entity + by_date - by_row
    failed = np.flatnonzero(np.diag(covariance) <= 0)
    if not len(failed):
        return Clustered(covariance, clusters, "")
    worst = failed[0], failed[0]
    larger, name = (by_entity, "entity") if by_entity[worst] >= by_date[worst] else (by_date, "date")
    return Clustered(
        larger,
        clusters,
        f"the two-way covariance has a variance that is not positive; the larger one-way covariance, by {name}, "
        "stands in its place",
    )
