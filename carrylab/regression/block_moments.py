"""Per-date moments of a panel, and regressions on sums of them: many draws of dates at once, effects anew in each."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array

from carrylab.errors import InferenceError
from carrylab.regression.batch import factor, invert, running, solve
from carrylab.regression.effects import Effects, absorb
from carrylab.regression.sample import Bools, Floats, Ints, Sample


@dataclass(frozen=True, eq=False, slots=True)
class PanelMoments:
    """Running totals (S + 1, C) over the dates of a span of per-date sums over entities, each group's mean out.

    Columns: XX (upper triangle, `terms` K), XY (K, L), X (G, K), Y (G, L) and the rows 1 (G) of the G groups of
    entities that share a constant; G is 0 with time effects alone.
    """

    totals: Floats
    terms: int
    legs: int
    groups: int

    @property
    def cuts(self) -> list[int]:
        """Where XX, XY, X and Y end."""
        k, legs, groups = self.terms, self.legs, self.groups
        sizes = (k * (k + 1) // 2, k * legs, groups * k, groups * legs)
        return list(itertools.accumulate(sizes))


def panel_moments(sample: Sample, span: slice, effects: Effects) -> PanelMoments:
    """The moments of a sample on the dates of a span, date means out first where there are time effects."""
    mask, k = sample.mask[span], sample.x.shape[2]
    labels = _labels(sample, effects)
    values = _without_dates(np.concatenate([sample.x[span], sample.y[span]], axis=2), mask, effects)
    group = np.zeros((len(labels), int(labels.max()) + 1))
    group[np.flatnonzero(labels >= 0), labels[labels >= 0]] = 1.0
    count = np.maximum(mask.sum(axis=0) @ group, 1.0)
    values -= group @ ((group.T @ values.sum(axis=0)) / count[:, None])
    values *= mask[:, :, None]
    x, y = values[:, :, :k], values[:, :, k:]
    first, second = np.triu_indices(k)
    by_group = np.einsum("tnp,ng->tgp", values, group)
    parts = (
        np.einsum("tnp,tnp->tp", x[:, :, first], x[:, :, second]),
        np.einsum("tnk,tnl->tkl", x, y),
        by_group[:, :, :k],
        by_group[:, :, k:],
        mask @ group,
    )
    columns = np.concatenate([part.reshape(len(mask), -1) for part in parts], axis=1)
    return PanelMoments(running(columns), k, y.shape[2], group.shape[1])


def _labels(sample: Sample, effects: Effects) -> Ints:
    """Which group's constant each entity takes (N,), -1 for none of its own."""
    N = sample.mask.shape[1]
    if effects == "both" and sample.mask.any(axis=1).sum() * sample.mask.any(axis=0).sum() != sample.mask.sum():
        raise InferenceError(
            f"{sample.label or 'the sample'}: entity and time effects of a panel with holes cannot be taken out draw "
            "by draw; choose entity effects"
        )
    return {
        "none": np.zeros(N, dtype=np.int64),
        "entity": np.arange(N),
        "time": np.full(N, -1),
        "both": np.arange(N),
    }[effects]


def _without_dates(values: Floats, mask: Bools, effects: Effects) -> Floats:
    """Values (S, N, P) less their date means where there are time effects, which no draw of dates changes."""
    if effects not in ("time", "both"):
        return values
    rest: Floats = (values - absorb((values,), mask, np.ones(len(mask)), "time").date[:, None]) * mask[:, :, None]
    return rest


def summed(totals: Floats, starts: Ints, length: int, last: int) -> Floats:
    """Moments summed over the drawn blocks (C, B), from their running totals (S + 1, C).

    `starts` (B, m): first rows of blocks of `length` dates each, the last block of a draw having `last` dates.
    """
    whole, drawn = totals[length:] - totals[:-length], starts[:, :-1]
    ends = np.arange(len(drawn) + 1) * drawn.shape[1]
    picked = csr_array((np.ones(drawn.size), drawn.ravel(), ends), shape=(len(drawn), len(whole)))
    found = picked @ whole
    found += totals[starts[:, -1] + last]
    found -= totals[starts[:, -1]]
    return np.ascontiguousarray(found.T)


@dataclass(frozen=True, eq=False, slots=True)
class Solved:
    """Slopes (K, L, B) of B draws, the inverses (K, K, B) of their moments, and the groups' means in each draw.

    `mean_x` (G, K, B), `mean_y` (G, L, B): what the moments' own means leave.
    """

    slopes: Floats
    inverse: Floats
    mean_x: Floats
    mean_y: Floats


def normal_equations(moments: PanelMoments, sums: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """A (K, K, B) and B (K, L, B) of sums (C, B) after the groups' means are out, and those means."""
    k, legs, groups, draws = moments.terms, moments.legs, moments.groups, sums.shape[1]
    xx, xy, x, y, rows = np.split(sums, moments.cuts)
    count = np.maximum(rows, 1.0)[:, None]
    x, y = x.reshape(groups, k, draws), y.reshape(groups, legs, draws)
    mean_x, mean_y = x / count, y / count
    place = np.zeros((k, k), dtype=np.int64)
    first, second = np.triu_indices(k)
    place[first, second] = place[second, first] = np.arange(len(first))
    inside = xx[place] - np.einsum("gkb,gjb->kjb", mean_x, x)
    cross = xy.reshape(k, legs, draws) - np.einsum("gkb,glb->klb", mean_x, y)
    return inside, cross, mean_x, mean_y


def slopes_of(moments: PanelMoments, sums: Floats) -> Floats:
    """Slopes (K, L, B) from sums (C, B)."""
    inside, cross, _, _ = normal_equations(moments, sums)
    return solve(factor(inside), cross)


def solved(moments: PanelMoments, sums: Floats) -> Solved:
    """Slopes and what the scores need, from sums (C, B)."""
    inside, cross, mean_x, mean_y = normal_equations(moments, sums)
    lower = factor(inside)
    return Solved(solve(lower, cross), invert(lower), mean_x, mean_y)


def influence_weights(moments: PanelMoments, found: Solved) -> Floats:
    """What each moment counts in a date's influence on the slopes, (C, B, K L): influence = moments x weights.

    With m_g, n_g the draw's means of x and y, a_g = n_g - m_g' b: the score of date t is
    XY - XX b - sum_g m_g (Y_g - X_g b)' - X_g a_g' + 1_g m_g a_g', times A^-1.
    """
    b, mean_x = found.slopes, found.mean_x
    k, legs, draws = b.shape
    left = found.mean_y - np.einsum("gkb,klb->glb", mean_x, b)
    weights = np.zeros((moments.totals.shape[1], k, legs, draws))
    xx, xy, x, y, rows = np.split(weights, moments.cuts)
    for at, (p, q) in enumerate(zip(*np.triu_indices(k), strict=True)):
        xx[at, p] = -b[q]
        xx[at, q] = -b[p]
    for at, (term, leg) in enumerate(np.ndindex(k, legs)):
        xy[at, term, leg] = 1.0
    by_term = x.reshape(moments.groups, k, k, legs, draws)
    np.einsum("gjb,ilb->gijlb", mean_x, b, out=by_term)
    by_leg = y.reshape(moments.groups, legs, k, legs, draws)
    for term in range(k):
        by_term[:, term, term] -= left
    for leg in range(legs):
        by_leg[:, leg, :, leg] = -mean_x
    np.einsum("gjb,glb->gjlb", mean_x, left, out=rows)
    turned = np.einsum("kjb,cjlb->cbkl", found.inverse, weights)
    return np.ascontiguousarray(turned).reshape(len(weights), draws, k * legs)
