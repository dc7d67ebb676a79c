"""The regression and its studentised slope on many draws at once, by the same formulas as on the data."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields
from typing import TypeVar

import numpy as np
from scipy.sparse import csr_array

from carrylab.errors import InferenceError
from carrylab.regression.effects import Effects, absorb
from carrylab.regression.fit import fit
from carrylab.regression.longrun import cosine_count, used_span
from carrylab.regression.sample import Bools, Floats, Ints, OneStep, Sample, take


@dataclass(frozen=True, eq=False, slots=True)
class Measures:
    """The signal's `slope`, its t against the null with 1B error `one_period` and with cosines `cosine`, and `r2`.

    All of the same shape: (H,) on the data, (B, H) on draws.
    """

    slope: Floats
    one_period: Floats
    cosine: Floats
    r2: Floats


@dataclass(frozen=True, eq=False, slots=True)
class CurveMeasures:
    """The signal's `slope`, its t against the null with `cosine` and with `bartlett` error of the overlap, and `r2`.

    All of the same shape: (H,) on the data, (B, H) on draws.
    """

    slope: Floats
    cosine: Floats
    bartlett: Floats
    r2: Floats


Kind = TypeVar("Kind", Measures, CurveMeasures)


def joined(parts: Sequence[Kind], *, axis: int) -> Kind:
    """Measures one after the other along an axis."""
    kind = type(parts[0])
    return kind(*(np.concatenate([getattr(part, one.name) for part in parts], axis=axis) for one in fields(kind)))


def each(found: Kind, change: Callable[[Floats], Floats]) -> Kind:
    """The same measures with every array changed alike."""
    kind = type(found)
    return kind(*(change(getattr(found, one.name)) for one in fields(kind)))


@dataclass(frozen=True, eq=False, slots=True)
class Group:
    """One regression inside a design: its columns of the design, span of used dates, and cosines (nu, n)."""

    columns: Ints
    span: slice
    cosines: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Design:
    """What stays the same in all draws of one panel: entities `columns`, effects, null slope, masks and windows.

    `null`: the slope tested. `beside`: the part of it that draws add to the window sums of one-period outcomes.

    `mask` (T, n): rows of the regression. `there` (T, n): one-period outcomes that stand inside its windows.
    `ahead` (T, T) sums outcomes over each origin's window with the step weights; `back` is its transpose.
    `controls` (T n, K-1): added predictors after the effects are out, at their data values, made orthonormal.
    """

    columns: Ints
    effects: Effects
    null: float
    beside: float
    mask: Bools
    there: Bools
    ahead: csr_array
    back: csr_array
    controls: Floats
    groups: tuple[Group, ...]


@dataclass(frozen=True, eq=False, slots=True)
class Question:
    """Which leg of a sample is asked about, its slope under the null, and the effects.

    `through`: the part of the null slope that comes through one-period outcomes because the signal predicts them; the
    rest stands beside their window sums, as where a leg less a multiple of the signal is what they add up to.
    """

    sample: Sample
    leg: int
    null: float
    effects: Effects
    through: float = 0.0


def designs(question: Question, groups: tuple[Ints, ...]) -> list[Design]:
    """The fewest designs that serve all groups of entities: one where entity effects leave no tie between groups.

    With other effects, or with added predictors, each group takes out its own.
    """
    sample = question.sample
    if question.effects == "entity" and len(sample.terms) == 1:
        return [_design(question, np.arange(sample.mask.shape[1]), groups)]
    return [_design(question, own, (np.arange(len(own)),)) for own in groups]


def one_step_of(sample: Sample, leg: int) -> OneStep:
    """The leg's one-period outcomes (T, N), refused where there are none or where they come by origin and step."""
    outcome = sample.one_step[leg]
    if outcome is None:
        raise InferenceError(f"leg '{sample.legs[leg]}' has no one-period outcomes to draw; choose cosine errors")
    if outcome.outcomes.ndim == 3:
        raise InferenceError(
            f"leg '{sample.legs[leg]}' has one-period outcomes by origin and step, as bonds do; they cannot be drawn "
            "date by date, choose draws that rebuild the curve, or one-period errors"
        )
    return outcome


def window_sums(steps: Ints, weights: Floats) -> csr_array:
    """The matrix (T, T) that turns one-period outcomes into sums over each origin's window, cut at the last date."""
    T = len(steps)
    step = np.arange(1, min(len(weights), T - 1) + 1)
    origin, ahead = np.meshgrid(np.arange(T), step, indexing="ij")
    inside = (ahead <= steps[:, None]) & (origin + ahead < T)
    rows, moves = origin[inside], ahead[inside]
    return csr_array((weights[moves - 1], (rows, rows + moves)), shape=(T, T))


def measure(design: Design, x: Floats, y: Floats, one: Floats) -> Measures:
    """Slope, both t and R2 of every group (G, B) from draws (T, n, B) of signal, leg and one-period outcomes.

    The inputs are in C order and overwritten. With x~, y~ after effects and controls are out (Frisch and Waugh 1933)
    and Sxx = sum x~^2:
    b = sum x~ y~ / Sxx, t = (b - null) / error. 1B error: root of sum_tau (sum_i u W)^2 / Sxx with W the window sums
    of x~ and u the outcomes after the effects are out. Cosine error: root of n/nu sum_j Lam_j^2 / Sxx, Lam_j of the
    date scores sum_i x~ (y~ - b x~).
    """
    take_out(x, design.mask, design.effects)
    take_out(y, design.mask, design.effects)
    take_out(one, design.there, design.effects)
    yy = np.einsum("tnb,tnb->nb", y, y)
    explained = _project(design, x, y)
    one *= (design.back @ x.reshape(len(x), -1)).reshape(x.shape)
    y *= x
    x *= x
    parts = [_of_group(design.null, group, (x, y, one), (yy, explained)) for group in design.groups]
    return Measures(*(np.stack(values) for values in zip(*parts, strict=True)))


def _of_group(
    null: float, group: Group, products: tuple[Floats, Floats, Floats], squares: tuple[Floats, Floats]
) -> tuple[Floats, ...]:
    """slope, t (1B), t (cosine) and R2 (B,) of one group.

    `products` (T, n, B): x~ x~, x~ y~ and u W; `squares`: of y by entity (n, B), and what controls explain (B,).
    """
    xx, xy, scores = (summed(part, group.columns) for part in products)
    total, cross = xx.sum(axis=0), xy.sum(axis=0)
    slope = cross / total
    loads = group.cosines @ (xy[group.span] - slope * xx[group.span])
    of_cosines = np.sqrt(np.einsum("jb,jb->b", loads, loads))
    of_periods = np.sqrt(np.einsum("tb,tb->b", scores, scores))
    away = cross - null * total
    r2 = (squares[1] + slope * cross) / squares[0][group.columns].sum(axis=0)
    return slope, away / of_periods, away / of_cosines, r2


def summed(values: Floats, columns: Ints) -> Floats:
    """Sum over the group's entities (T, B)."""
    if len(columns) == 1:
        return values[:, columns[0]]
    total: Floats = (values if len(columns) == values.shape[1] else values[:, columns]).sum(axis=1)
    return total


def take_out(values: Floats, mask: Bools, effects: Effects) -> None:
    """Take the effects out of every draw (T, n, B) in place, zero outside the mask."""
    values *= mask[:, :, None]
    if effects == "entity":
        count = mask.sum(axis=0)
        values -= values.sum(axis=0) / np.where(count > 0, count, 1)[:, None]
    else:
        absorbed = absorb((values,), mask, np.ones(len(mask)), effects)
        values -= absorbed.entity
        values -= absorbed.date[:, None]
    if not mask.all():
        values *= mask[:, :, None]


def _project(design: Design, x: Floats, y: Floats) -> Floats:
    """Take the controls out of x and y in place; what they explain of y's squares (B,)."""
    basis, draws = design.controls, x.shape[2]
    loads = basis.T @ y.reshape(-1, draws)
    for values in (x, y) if basis.shape[1] else ():
        flat = values.reshape(-1, draws)
        flat -= basis @ (basis.T @ flat)
    explained: Floats = np.einsum("kb,kb->b", loads, loads)
    return explained


def _design(question: Question, columns: Ints, groups: tuple[Ints, ...]) -> Design:
    """The design of some entities and its groups, whose columns count within them."""
    part = take(question.sample, columns)
    outcome = one_step_of(part, question.leg)
    ahead = window_sums(part.steps, outcome.weights)
    back = ahead.T.tocsr()
    return Design(
        columns=columns,
        effects=question.effects,
        null=question.null,
        beside=question.null - question.through,
        mask=part.mask,
        there=(back @ part.mask.astype(np.float64) != 0) & np.isfinite(outcome.outcomes),
        ahead=ahead,
        back=back,
        controls=_controls(part, question.effects),
        groups=tuple(group_of(question, take(part, own), own) for own in groups),
    )


def group_of(question: Question, sample: Sample, columns: Ints) -> Group:
    """The span and the scaled cosines, sqrt(2/nu) cos(pi j (t-1/2)/n), as the data's own influence sets them."""
    span = used_span(fit(sample, effects=question.effects).influence[:, :, question.leg])
    n = span.stop - span.start
    count = cosine_count(n, sample.overlap)
    angles = np.pi * np.outer(np.arange(1, count + 1), np.arange(n) + 0.5) / n
    return Group(columns, span, math.sqrt(2.0 / count) * np.cos(angles))


def _controls(sample: Sample, effects: Effects) -> Floats:
    """An orthonormal basis (T n, K-1) of the added predictors after the effects are out."""
    values = np.array(sample.x[:, :, 1:])
    if not values.shape[2]:
        return np.empty((sample.mask.size, 0))
    take_out(values, sample.mask, effects)
    basis: Floats = np.linalg.qr(values.reshape(sample.mask.size, -1))[0]
    return basis
