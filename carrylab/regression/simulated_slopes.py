"""Slopes and influence in many simulated samples at once, by the formulas of `fit` and `instrument`."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.regression.draws_measure import take_out
from carrylab.regression.effects import Effects
from carrylab.regression.sample import Bools, Floats
from carrylab.regression.simulated import Frame, Outcomes


@dataclass(frozen=True, eq=False, slots=True)
class Weighed:
    """The signal's slope in B samples by one way of weighing rows: least squares, or the instrument.

    The slope is linear in the leg, so every array has the pair of legs of `Simulated`: `slope` (2, B), `residual`
    (2, T, N, B). `moved`: for each term and the constant last, what a row's residual counts for in its coefficient,
    (T, N, B).
    """

    slope: Floats
    residual: Floats
    moved: tuple[Floats, ...]

    def influence(self, term: int) -> Floats:
        """Contribution of each date to the error of one coefficient (T, 2, B)."""
        series: Floats = np.einsum("tnb,ptnb->tpb", self.moved[term], self.residual)
        return series

    def rows(self, term: int) -> Floats:
        """The same row by row (2, T, N, B)."""
        rows: Floats = self.moved[term] * self.residual
        return rows


@dataclass(frozen=True, eq=False, slots=True)
class Prepared:
    """Simulated samples after the effects are out.

    `x` (T, N, B), `y` (2, T, N, B); `z` (T, N, B): the instrument, None where it is not wanted; `mean` (B,) of the
    signal over the rows.
    """

    x: Floats
    y: Floats
    z: Floats | None
    mean: Floats


def prepare(frame: Frame, signal: Floats, leg: Floats, *, instrument: bool) -> Prepared:
    """Filter the instrument from the signal (T, N, B), then take the effects out of it and of both legs, in place."""
    mask, effects = frame.mask, frame.effects
    z = None
    if instrument and frame.instrumented is not None:
        z = filtered(signal, mask, frame.instrumented.root)
        _take_out_date_means(z, mask, effects)
    signal *= mask[:, :, None]
    mean = signal.sum(axis=(0, 1)) / frame.estimate.total
    take_out(signal, mask, effects)
    for part in leg:
        take_out(part, mask, effects)
    return Prepared(signal, leg, z, mean)


def filtered(x: Floats, used: Bools, root: float) -> Floats:
    """The IVX instrument (T, N, B) of signals (T, N, B), as `instrument.filtered`, date by date for all samples."""
    z, state, last = np.zeros_like(x), np.zeros(x.shape[1:]), np.zeros(x.shape[1:])
    seen = np.zeros(x.shape[1], dtype=np.bool_)
    for t in range(len(x)):
        state *= root
        here = used[t]
        if here.all() and seen.all():
            state += x[t] - last
            z[t], last = state, x[t]
            continue
        moves = here & seen
        state[moves] += x[t, moves] - last[moves]
        z[t, here] = state[here]
        last = np.where(here[:, None], x[t], last)
        seen = seen | here
    return z


def _take_out_date_means(z: Floats, mask: Bools, effects: Effects) -> None:
    if effects in ("time", "both"):
        z -= (z.sum(axis=1) / np.maximum(mask.sum(axis=1), 1)[:, None])[:, None]
        z *= mask[:, :, None]


def least_squares(frame: Frame, made: Prepared) -> Weighed:
    """Least squares, b = (sum x~ x~')^-1 sum x~ y~."""
    terms = _terms(made.x, frame.controls)
    return _weighed(frame, made, terms, terms)


def instrumented(frame: Frame, made: Prepared) -> Weighed:
    """The instrument, b = (sum z x~')^-1 sum z y~."""
    assert made.z is not None
    return _weighed(frame, made, _terms(made.x, frame.controls), _terms(made.z, frame.carriers))


def _terms(signal: Floats, others: Floats) -> list[Floats]:
    return [signal, *(others[:, :, [at]] for at in range(others.shape[2]))]


def _weighed(frame: Frame, made: Prepared, terms: list[Floats], carriers: list[Floats]) -> Weighed:
    B = made.x.shape[2]
    inside = np.empty((B, len(terms), len(terms)))
    for j, carrier in enumerate(carriers):
        for k, term in enumerate(terms):
            inside[:, j, k] = np.einsum("tnb,tnb->b", carrier, term)
    inverse = np.linalg.inv(inside)
    cross = np.stack([np.einsum("tnb,ptnb->pb", carrier, made.y) for carrier in carriers])
    coefficients = np.einsum("bjk,kpb->jpb", inverse, cross)
    residual = made.y - terms[0] * coefficients[0][:, None, None]
    for term, values in zip(terms[1:], coefficients[1:], strict=True):
        residual -= term * values[:, None, None]
    moved = [
        sum((inverse[:, j, k] * carrier for k, carrier in enumerate(carriers)), start=np.zeros(1))
        for j in range(len(terms))
    ]
    means = [made.mean, *np.broadcast_to(frame.estimate.means[1:, None], (len(terms) - 1, B))]
    const = np.broadcast_to((frame.mask / frame.estimate.total)[:, :, None], made.x.shape).copy()
    for mean, part in zip(means, moved, strict=True):
        const -= mean * part
    return Weighed(coefficients[0], residual, (*moved, const))


def null_series(frame: Frame, found: Sequence[Weighed], x: Floats, outcomes: Outcomes) -> list[Floats]:
    """Influence of the signal's slope under the null (T, 2, B), for each way of weighing rows.

    Hodrick's 1B scores, as in `null_influence` and `instrument_null`; outcomes are made once for all. `x` (T, N, B):
    the signal after the effects are out.
    """
    outcome, weights = frame.sample.one_step[0], [one.moved[0] for one in found]
    assert outcome is not None
    if outcome.outcomes.ndim == 3:
        return _by_step(frame, weights, x, outcomes)
    news = outcomes(0)
    for part in news:
        take_out(part, frame.there[0], frame.effects)
    covered = ((frame.back @ part.reshape(len(part), -1)).reshape(part.shape) for part in weights)
    return [np.einsum("tnb,ptnb->tpb", part, news) for part in covered]


def _by_step(frame: Frame, weights: list[Floats], x: Floats, outcomes: Outcomes) -> list[Floats]:
    """What a slope of one adds to every step, x over the sum of the steps' weights, is made here."""
    outcome = frame.sample.one_step[0]
    assert outcome is not None
    totals = [np.zeros((len(part), 2, part.shape[2])) for part in weights]
    scale, own, there = outcome.weights.sum(), x, frame.mask
    for step, (now, weight) in enumerate(zip(frame.there, outcome.weights, strict=True), start=1):
        news = outcomes(step)
        take_out(news, now, frame.effects)
        if not np.array_equal(now, there):
            own, there = x.copy(), now
            take_out(own, now, frame.effects)
        for total, part in zip(totals, weights, strict=True):
            total[step:, 0] += weight * np.einsum("tnb,tnb->tb", part[:-step], news[:-step])
            total[step:, 1] += weight / scale * np.einsum("tnb,tnb->tb", part[:-step], own[:-step])
    return totals
