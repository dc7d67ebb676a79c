"""Forecasts out of sample: every origin trains on outcomes that were known by then, and on nothing else."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from carrylab.errors import SampleError
from carrylab.regression.sample import Floats, Ints, Sample

SINGULAR = 1e12


@dataclass(frozen=True, eq=False, slots=True)
class Training:
    """Rows [start_t, stop_t) that train the forecast of origin t, (T,) each; `least` rows an entity needs."""

    start: Ints
    stop: Ints
    least: int


@dataclass(frozen=True, eq=False, slots=True)
class Forecasts:
    """What was forecast at each origin, NaN where nothing was.

    `slopes` (T, K, L) as estimated at each origin; `model` and `mean` (T, N, L): the regression's forecast and the mean
    of the entity's outcomes known by then; `variance` (T, N, L) of these outcomes.
    """

    slopes: Floats
    model: Floats
    mean: Floats
    variance: Floats


def training(ends: Ints, first: int, *, start: Ints | None = None, least: int = 2) -> Training:
    """The training rows of every origin from row `first` on.

    `ends` (T,): row in which the outcome of each origin is known, -1 where it never is; it does not fall. An outcome
    trains the forecast of origin t from the row in which it is known on, ends_s <= t. `start` (T,): first row of a
    rolling window, None for all rows.
    """
    known = np.where(ends >= 0, ends, len(ends))
    stop = np.searchsorted(np.maximum.accumulate(known), np.arange(len(ends)), side="right")
    stop = np.where(np.arange(len(ends)) >= first, stop, 0)
    begin = np.zeros(len(ends), dtype=np.int64) if start is None else start
    return Training(np.minimum(begin, stop), stop.astype(np.int64), least)


def forecasts(sample: Sample, signal: Floats, train: Training, *, entity: bool) -> Forecasts:
    """Recursive or rolling forecasts of every leg of a sample at the terms `signal` (T, N, K), known at each origin.

    At each origin b = A^-1 sum x~ y~ over the training rows with entity means (or grand means) taken out, and the
    forecast of entity i is ybar_i + (x_it - xbar_i)' b. All sums are differences of sums to date, of values less their
    means over the first training rows, so levels cost no digits and nothing later enters anywhere.
    Raises SampleError where no origin has training rows.
    """
    used = np.flatnonzero(train.stop > train.start)
    if not len(used):
        raise SampleError(
            f"{sample.label}: no outcome is known by the first origin that is to be forecast; start later"
        )
    mask = sample.mask
    centre = _first_means(sample, int(train.stop[used[0]]), entity=entity)
    x = (sample.x - centre[0]) * mask[:, :, None]
    y = (sample.y - centre[1]) * mask[:, :, None]
    cross = _window(np.einsum("tik,til->tkl", x, x), train), _window(np.einsum("tik,til->tkl", x, y), train)
    sums = tuple(_window(part, train) for part in (mask[:, :, None].astype(np.float64), x, y, y**2))
    if not entity:
        sums = tuple(part.sum(axis=1, keepdims=True) for part in sums)
    return _forecast(sums, cross, (signal - centre[0], centre[1]), train.least)


def _first_means(sample: Sample, stop: int, *, entity: bool) -> tuple[Floats, Floats]:
    """Means by entity (N, K) and (N, L) over the rows that train the first forecast, or over all entities (1, ...)."""
    size, x, y = (part[:stop].sum(axis=0) for part in (sample.mask[:, :, None].astype(np.float64), sample.x, sample.y))
    if not entity:
        size, x, y = (part.sum(axis=0, keepdims=True) for part in (size, x, y))
    return x / np.maximum(size, 1.0), y / np.maximum(size, 1.0)


def _window(values: Floats, train: Training) -> Floats:
    """Sums over each origin's training rows (T, ...)."""
    sums = np.concatenate([np.zeros((1, *values.shape[1:])), np.cumsum(values, axis=0)])
    window: Floats = sums[train.stop] - sums[train.start]
    return window


def _forecast(
    sums: tuple[Floats, ...], cross: tuple[Floats, Floats], at: tuple[Floats, Floats], least: int
) -> Forecasts:
    """From training sums of ones, x, y and y^2 by entity (or over all), and of x x' and x y' over all."""
    count, sx, sy, syy = sums
    terms, centre = at
    size = np.maximum(count, 1.0)
    ready = count >= least
    inside = cross[0] - np.einsum("tik,til->tkl", sx / size, sx)
    against = cross[1] - np.einsum("tik,til->tkl", sx / size, sy)
    solvable = ready.any(axis=(1, 2)) & (np.linalg.cond(inside) < SINGULAR)
    slopes = np.full(against.shape, np.nan)
    slopes[solvable] = np.linalg.solve(inside[solvable], against[solvable])
    mean = np.where(ready, sy / size, np.nan)
    model = mean + np.einsum("tik,tkl->til", terms - sx / size, slopes)
    mean = mean + np.zeros_like(model)
    variance = np.where(ready & (count > 1), (syy - sy**2 / size) / np.maximum(count - 1.0, 1.0), np.nan)
    return Forecasts(slopes, model + centre, mean + centre, variance + np.zeros_like(model))
