"""Simulated samples on the rows that the data have: what stays the same in all of them, and what is drawn."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, fields, replace
from typing import Any, TypeVar, cast

import numpy as np
from scipy.sparse import csr_array

from carrylab.errors import SampleError
from carrylab.regression.draws_measure import take_out, window_sums
from carrylab.regression.effects import Effects
from carrylab.regression.fit import Estimate, fit
from carrylab.regression.instrument import Instrumented, instrument
from carrylab.regression.longrun import cosine_count, used_span
from carrylab.regression.sample import Bools, Floats, OneStep, Sample, make_sample

Outcomes = Callable[[int], Floats]


@dataclass(frozen=True, eq=False, slots=True)
class Simulated:
    """B samples in which nothing is paid, and what a slope of one adds to them; linear, so any slope is between.

    `signal` (T, N, B). `leg` (2, T, N, B): the return leg where nothing is paid, and what a slope of one adds to it.
    `outcomes`: where the data have one-period outcomes by period, the same pair (2, T, N, B) of these (called with 0);
    where they have them by origin and step, those of step 1, 2, ... in turn where nothing is paid, (T, N, B), a slope
    of one adding signal / sum of weights to each; None where there are none. All may be overwritten.
    """

    signal: Floats
    leg: Floats
    outcomes: Outcomes | None


@dataclass(frozen=True, eq=False, slots=True)
class Cosines:
    """sqrt(2/nu) cos(pi j (t - 1/2) / n), `loads` (nu, n), over the n dates `span` that an estimate uses."""

    span: slice
    loads: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Frame:
    """What all simulated samples of one regression share with the data.

    `sample`: one leg, the return. `estimate`: least squares on the data, `instrumented` the instrument's, or None and
    `problem` says why. `controls`, `carriers` (T, N, K-1): added predictors and their instruments after the effects
    are out. `there`: which one-period outcomes (T, N) stand inside the windows, one a step or one for all periods;
    `back` (T, T) sums the origins whose window covers a period. `cosines` for least squares and for the instrument.
    """

    sample: Sample
    estimate: Estimate
    instrumented: Instrumented | None
    problem: str
    controls: Floats
    carriers: Floats
    there: tuple[Bools, ...]
    back: csr_array
    cosines: tuple[Cosines, Cosines]

    @property
    def mask(self) -> Bools:
        """Rows of the regression (T, N)."""
        return self.sample.mask

    @property
    def effects(self) -> Effects:
        """Effects of the regression."""
        return self.estimate.effects


def frame_of(sample: Sample, leg: int, effects: Effects) -> Frame:
    """The frame of one leg of a sample."""
    own = one_leg(sample, leg)
    estimate = fit(own, effects=effects)
    try:
        instrumented, problem = instrument(own, estimate), ""
    except SampleError as why:
        instrumented, problem = None, str(why)
    outcome = own.one_step[0]
    weights = np.ones(1) if outcome is None else outcome.weights
    both = estimate, estimate if instrumented is None else instrumented.estimate
    return Frame(
        sample=own,
        estimate=estimate,
        instrumented=instrumented,
        problem=problem,
        controls=_after_effects(own.x[:, :, 1:], own.mask, effects),
        carriers=np.zeros_like(own.x[:, :, 1:]) if instrumented is None else instrumented.carrier.x[:, :, 1:],
        there=_there(own),
        back=window_sums(own.steps, weights).T.tocsr(),
        cosines=(_cosines(both[0], own.overlap), _cosines(both[1], own.overlap)),
    )


def one_leg(sample: Sample, leg: int) -> Sample:
    """The same rows of a sample with one of its legs."""
    others = [len(sample.terms) + at for at in range(len(sample.legs)) if at != leg]
    return replace(
        sample,
        legs=(sample.legs[leg],),
        y=sample.y[:, :, [leg]],
        one_step=(sample.one_step[leg],),
        standing=np.delete(sample.standing, others, axis=1),
    )


def sample_of(frame: Frame, drawn: Simulated, number: int, slope: float) -> Sample:
    """One simulated sample to which a slope was added, as the routines take it, before its arrays are overwritten."""
    data, mask = frame.sample, frame.mask
    x = data.x.copy()
    x[:, :, 0] = drawn.signal[:, :, number]
    x[~mask] = np.nan
    leg = drawn.leg[0, :, :, number] + slope * drawn.leg[1, :, :, number]
    return make_sample(
        x,
        leg[:, :, None],
        terms=data.terms,
        legs=data.legs,
        steps=data.steps,
        overlap=data.overlap,
        one_step=[_one_step(data.one_step[0], drawn, number, slope)],
        label=data.label,
    )


def _one_step(outcome: OneStep | None, drawn: Simulated, number: int, slope: float) -> OneStep | None:
    if outcome is None or drawn.outcomes is None:
        return None
    if outcome.outcomes.ndim == 2:
        pair = drawn.outcomes(0)[..., number]
        news = pair[0] + slope * pair[1]
    else:
        added = slope * drawn.signal[:, :, number] / outcome.weights.sum()
        steps = range(1, len(outcome.weights) + 1)
        news = np.stack([drawn.outcomes(step)[:, :, number] + added for step in steps], axis=2)
    return OneStep(np.where(np.isfinite(outcome.outcomes), news, np.nan), outcome.weights)


def _after_effects(values: Floats, mask: Bools, effects: Effects) -> Floats:
    rest = np.array(values)
    if rest.shape[2]:
        take_out(rest, mask, effects)
    return rest


def _there(sample: Sample) -> tuple[Bools, ...]:
    outcome = sample.one_step[0]
    if outcome is None:
        return ()
    if outcome.outcomes.ndim == 3:
        inside = (sample.mask & (sample.steps >= step)[:, None] for step in range(1, outcome.outcomes.shape[2] + 1))
        return tuple(rows & np.isfinite(outcome.outcomes[:, :, at]) for at, rows in enumerate(inside))
    covers = window_sums(sample.steps, np.ones(len(outcome.weights))).T
    return ((covers @ sample.mask.astype(np.float64) > 0) & np.isfinite(outcome.outcomes),)


def _cosines(estimate: Estimate, overlap: int) -> Cosines:
    span = used_span(estimate.influence[:, :, 0])
    n = span.stop - span.start
    count = cosine_count(n, overlap)
    angles = np.pi * np.outer(np.arange(1, count + 1), np.arange(n) + 0.5) / n
    return Cosines(span, math.sqrt(2.0 / count) * np.cos(angles))


Record = TypeVar("Record")


def side_by_side(parts: list[Record]) -> Record:
    """Records of arrays whose last axis is the samples, one after the other; records inside them alike."""
    first: Any = parts[0]
    if isinstance(first, np.ndarray):
        return cast(Record, np.concatenate(cast(list[Floats], parts), axis=-1))
    return cast(
        Record, type(first)(*(side_by_side([getattr(part, one.name) for part in parts]) for one in fields(first)))
    )
