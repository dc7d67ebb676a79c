"""What figures show that findings do not hold: the path of the signal, what followed, the points of a regression."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from carrylab.evidence.case import Case, Labelled
from carrylab.regression.sample import Floats, Ints, Sample

MOST_POINTS = 1200


@dataclass(frozen=True, eq=False, slots=True)
class Path:
    """Means over entities by date: `signal` (T,) wherever it stands, `legs` (T, L) over the rows of the regression."""

    days: npt.NDArray[np.datetime64]
    signal: Floats
    legs: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Points:
    """Rows of the regression with the effects and all other predictors out, and the grand means put back.

    `signal` (n,), `legs` (n, L), `centre` (1 + L,) the grand means of signal and legs; every `apart`-th date only, so
    that no two outcomes of one entity overlap.
    """

    signal: Floats
    legs: Floats
    centre: Floats
    apart: int


@dataclass(frozen=True, eq=False, slots=True)
class Picture:
    """What a figure of one pooled regression may draw: names, roles and weights (L,) of its legs, path, points."""

    market: str
    parity: str
    horizon: str
    interval: str
    signal: str
    legs: tuple[str, ...]
    roles: tuple[str, ...]
    weights: Floats
    effects: str
    path: Path
    points: Points
    states: tuple[Labelled, ...]


def picture_of(case: Case) -> Picture:
    """The picture of one parity's pooled fit."""
    fit, parity = case.pooled, case.parity
    return Picture(
        market=parity.market,
        parity=parity.name,
        horizon=str(parity.horizon),
        interval=parity.calendar.interval,
        signal=parity.signal_name,
        legs=tuple(leg.name for leg in parity.legs),
        roles=tuple(leg.role for leg in parity.legs),
        weights=fit.weights,
        effects=fit.estimate.effects,
        path=_path(case),
        points=_points(case),
        states=case.states,
    )


def _path(case: Case) -> Path:
    sample, signal = case.pooled.sample, case.parity.signal
    known = np.isfinite(signal)
    legs = np.where(sample.mask[:, :, None], sample.y, 0.0).sum(axis=1)
    return Path(
        days=case.parity.calendar.days,
        signal=_mean(np.where(known, signal, 0.0).sum(axis=1), known.sum(axis=1)),
        legs=_mean(legs, sample.mask.sum(axis=1)[:, None]),
    )


def _mean(total: Floats, count: npt.NDArray[np.int64]) -> Floats:
    return np.where(count > 0, total / np.maximum(count, 1), np.nan)


def _points(case: Case) -> Points:
    sample, estimate = case.pooled.sample, case.pooled.estimate
    K = len(sample.terms)
    rows, apart = _rows_apart(sample)
    t, i = np.nonzero(sample.mask[rows])
    t = rows[t]
    taken = estimate.absorbed.entity[i] + estimate.absorbed.date[t]
    x, y = sample.x[t, i] - taken[:, :K], sample.y[t, i] - taken[:, K:]
    y = y - x[:, 1:] @ estimate.coefficients[1:K]
    centre = np.concatenate([sample.x[sample.mask][:, :1].mean(axis=0), sample.y[sample.mask].mean(axis=0)])
    return Points(x[:, 0] + centre[0], y + centre[1:], centre, apart)


def _rows_apart(sample: Sample) -> tuple[Ints, int]:
    """Dates so far apart that outcomes do not overlap, counted back from the last, and few enough to be told apart."""
    used = np.flatnonzero(sample.mask.any(axis=1))
    apart = step = sample.overlap + 1
    rows = used[::-1][::apart][::-1]
    while len(rows) > 2 and int(sample.mask[rows].sum()) > MOST_POINTS:
        apart += step
        rows = used[::-1][::apart][::-1]
    return rows, apart
