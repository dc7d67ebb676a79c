"""Taking entity and time effects out of unbalanced panels with holes, exactly and block by block."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.linalg import cho_factor, cho_solve
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from carrylab.regression.sample import Bools, Floats, Sample

Effects = Literal["none", "entity", "time", "both"]
BLOCK = 1 << 18  # numbers in one block of dates: two megabytes, so a block stays in the cache


@dataclass(frozen=True, eq=False, slots=True)
class Absorbed:
    """What is subtracted from the terms and legs: value - entity[i] - date[t] in every used row.

    `entity` (N, P), `date` (T, P); without effects the grand mean stands in `entity`, the same for all.
    `count`: free parameters that this takes up, the constant included.
    """

    entity: Floats
    date: Floats
    count: int


def absorb(values: tuple[Floats, ...], mask: Bools, weights: Floats, effects: Effects) -> Absorbed:
    """Weighted least-squares effects of all columns in `values`, each (T, N, .) and zero outside the mask.

    Entity effects are entity means, time effects date means; both together solve the normal equations after the
    longer side is eliminated: (D_n - W' D_t^-1 W) a = S - W' D_t^-1 R, with W the weights in use (T, N), D their
    sums, S and R the weighted sums of the values by entity and by date.
    """
    by_entity = np.concatenate([np.tensordot(weights, part, axes=1) for part in values], axis=1)
    by_date = np.concatenate([part.sum(axis=1) for part in values], axis=1) * weights[:, None]
    size_n, size_t = np.einsum("ti,t->i", mask, weights), mask.sum(axis=1) * weights
    nothing_n, nothing_t = np.zeros_like(by_entity), np.zeros_like(by_date)
    if effects == "none":
        return Absorbed(nothing_n + by_entity.sum(axis=0) / size_t.sum(), nothing_t, 1)
    if effects == "entity":
        return Absorbed(_means(by_entity, size_n), nothing_t, int((size_n > 0).sum()))
    if effects == "time":
        return Absorbed(nothing_n, _means(by_date, size_t), int((size_t > 0).sum()))
    date_side, entity_side = _Side(weights, size_t, by_date), _Side(np.ones_like(size_n), size_n, by_entity)
    if len(size_n) <= len(size_t):
        entity, date, count = _two_way(mask, date_side, entity_side)
    else:
        date, entity, count = _two_way(mask.T, entity_side, date_side)
    return Absorbed(entity, date, count)


@dataclass(frozen=True, eq=False, slots=True)
class _Side:
    """One side of the panel: its unit's weights, their sizes in use, and the weighted sums of the values."""

    weights: Floats
    size: Floats
    sums: Floats


def _means(sums: Floats, size: Floats) -> Floats:
    return sums / np.where(size > 0, size, 1.0)[:, None]


def _two_way(mask: Bools, long: _Side, short: _Side) -> tuple[Floats, Floats, int]:
    """Effects of the shorter and of the longer side, and the number of free parameters. `mask` (long, short).

    Each part of the panel that no row ties to the rest has one parameter too many: its first effect is set to 0.
    """
    share = long.weights / np.where(long.size > 0, long.size, 1.0)
    cross = _gram(mask, long.weights * share) * short.weights[:, None] * short.weights
    right = short.sums - np.einsum("ls,lp->sp", mask, share[:, None] * long.sums) * short.weights[:, None]
    first, parts = _first_of_each_part(cross, short.size > 0)
    free = (short.size > 0) & ~first
    matrix = (np.diag(short.size) - cross)[np.ix_(free, free)]
    effect = np.zeros_like(short.sums)
    if free.any():
        factor = cho_factor(matrix)
        effect[free] = cho_solve(factor, right[free])
        effect[free] += cho_solve(factor, right[free] - matrix @ effect[free])
    carried = np.einsum("ls,sp->lp", mask, short.weights[:, None] * effect) * long.weights[:, None]
    return effect, _means(long.sums - carried, long.size), int((long.size > 0).sum() + (short.size > 0).sum()) - parts


def _gram(mask: Bools, scale: Floats) -> Floats:
    """Sum over the longer side of scale x mask mask', a block at a time."""
    total = np.zeros((mask.shape[1], mask.shape[1]))
    step = max(1, BLOCK // mask.shape[1])
    for start in range(0, len(mask), step):
        rows = mask[start : start + step].astype(np.float64)
        total += rows.T @ (rows * scale[start : start + step, None])
    return total


def _first_of_each_part(cross: Floats, here: Bools) -> tuple[Bools, int]:
    """Which units are the first of a connected part of the panel, and how many parts there are."""
    labels = np.where(here, connected_components(csr_array(cross > 0), directed=False)[1], -1)
    first = np.zeros(len(here), dtype=np.bool_)
    first[np.unique(labels, return_index=True)[1]] = True
    return first & here, len(np.unique(labels[here]))


def blocks(sample: Sample, absorbed: Absorbed, weights: Floats) -> Iterator[tuple[slice, Floats, Floats]]:
    """Rows after the effects are out, zero outside the mask, by blocks: dates, x (., N, K), y (., N, L)."""
    used = np.flatnonzero(sample.mask.any(axis=1) & (weights > 0))
    k = sample.x.shape[2]
    step = max(1, BLOCK // (sample.mask.shape[1] * absorbed.entity.shape[1]))
    for start in range(used[0], used[-1] + 1, step):
        dates = slice(start, min(start + step, used[-1] + 1))
        yield (
            dates,
            _without(sample.x[dates], absorbed.entity[:, :k], absorbed.date[dates, :k], sample.mask[dates]),
            _without(sample.y[dates], absorbed.entity[:, k:], absorbed.date[dates, k:], sample.mask[dates]),
        )


def _without(values: Floats, entity: Floats, date: Floats, mask: Bools) -> Floats:
    rest = values - entity
    rest -= date[:, None]
    rest *= mask[:, :, None]
    return rest
