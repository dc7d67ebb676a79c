"""Standard errors of every kind in many simulated samples at once, by the formulas of `standard_errors`."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from carrylab.errors import InferenceError, SampleError
from carrylab.regression.clusters import ClusterFactor, cluster_factor, counted_parameters
from carrylab.regression.covariance import ERRORS, LAGGED, ErrorOptions, standard_errors
from carrylab.regression.sample import Floats
from carrylab.regression.simulated import Frame, Simulated
from carrylab.regression.simulated_bias import Shift, shift_of
from carrylab.regression.simulated_forms import Found, Lagged, Plain, Rectangular, Shifted, TwoWay
from carrylab.regression.simulated_slopes import (
    Weighed,
    instrumented,
    least_squares,
    null_series,
    prepare,
)

BY_BIAS = "auto"  # as one-period, and with what the automatic choice goes by
SCORED = {"one-period", "instrument", "rectangular", BY_BIAS}
BY_ROWS = {"robust", "clustered: entity", "clustered: date", "clustered: both", "clustered: both, lagged"}
FORCED = tuple(kind for kind, row in ERRORS.items() if not row.overlap)


@dataclass(frozen=True, slots=True)
class Offer:
    """One kind of errors as the data carry it, `options` as `standard_errors` takes them.

    `lags` of a kernel, `df` and `bandwidth` of the law, finite-sample `factor`, and `words` as in print; `problem`
    says why the kind cannot be had. `ignores` is the overlap that a kind without lags leaves aside.
    """

    options: ErrorOptions
    lags: int = 0
    df: float = np.inf
    bandwidth: float = 0.0
    factor: ClusterFactor = "none"
    words: str = ""
    problem: str = ""
    ignores: int = 0

    @property
    def kind(self) -> str:
        """The kind's name in a study file."""
        return self.options.kind


def offer(frame: Frame, options: ErrorOptions) -> Offer:
    """What one kind is on the data; kinds without lags are forced where outcomes overlap."""
    sample, kind = frame.sample, options.kind
    ignores = sample.overlap if kind in FORCED else 0
    chosen = ErrorOptions(kind, 0 if ignores else options.lags, options.factor, options.reference)
    try:
        found = standard_errors(sample, frame.estimate, chosen)
    except (InferenceError, SampleError) as why:
        return Offer(chosen, problem=str(why), ignores=ignores)
    if kind == BY_BIAS and (found.kinds[0] != "one-period" or len(frame.there) != 1):
        return Offer(chosen, problem="the choice does not go by the bias of the slope here")
    if found.kinds[0] != kind and kind not in ("rectangular", BY_BIAS):
        return Offer(chosen, problem=found.warnings[0], ignores=ignores)
    lags = max(sample.overlap, options.lags or 0) if kind == "rectangular" else found.lags[0]
    words = ERRORS[found.kinds[0]].words + (f", lag {lags}" if kind in LAGGED else "")
    law = (float(found.df[0]), float(found.bandwidth[0]), found.factors[0])
    return Offer(chosen, lags, *law, words, ignores=ignores)  # type: ignore[arg-type]


@dataclass(frozen=True, eq=False, slots=True)
class RowSums:
    """Products of the rows' influence on each coefficient, the signal's first, (J, 3, B): by row, entity and date."""

    row: Floats
    entity: Floats
    date: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Parts:
    """What the kinds are made from: least squares and the instrument, each with its series under the null.

    `null` and `carried_null` (T, 2, B), `carried`, `shift` and `sums` are None where no kind on offer needs them.
    """

    frame: Frame
    squares: Weighed
    null: Floats | None
    carried: Weighed | None
    carried_null: Floats | None
    shift: Shift | None
    sums: RowSums | None


def measure(frame: Frame, drawn: Simulated, offers: Iterable[Offer]) -> dict[str, Found]:
    """Slopes and variances of every kind on offer, by its name; the arrays of `drawn` are overwritten."""
    wanted = [one for one in offers if not one.problem]
    parts = _parts(frame, drawn, {one.kind for one in wanted})
    return {one.kind: KINDS[one.kind](parts, one) for one in wanted}


def _parts(frame: Frame, drawn: Simulated, kinds: set[str]) -> Parts:
    carried = bool(kinds & {"instrument", "instrument, cosine"})
    made = prepare(frame, drawn.signal, drawn.leg, instrument=carried)
    ways = [least_squares(frame, made)] + ([instrumented(frame, made)] if carried else [])
    shift, outcomes = None, drawn.outcomes
    if BY_BIAS in kinds and outcomes is not None:
        shift = shift_of(frame, made.x, outcomes(0), ways[0])
    null: list[Floats | None] = [None, None]
    if kinds & SCORED and outcomes is not None:
        null = [*null_series(frame, ways, made.x, outcomes), None]
    sums = _row_sums(ways[0]) if kinds & BY_ROWS else None
    return Parts(frame, ways[0], null[0], ways[1] if carried else None, null[1], shift, sums)


def _row_sums(way: Weighed) -> RowSums:
    found: list[tuple[Floats, Floats, Floats]] = []
    for term in range(len(way.moved)):
        rows, series = way.rows(term), way.influence(term)
        by_entity = rows.sum(axis=1).transpose(1, 0, 2)
        found.append((crossed_rows(rows, rows), crossed(by_entity, by_entity), crossed(series, series)))
    return RowSums(*(np.stack(part) for part in zip(*found, strict=True)))


def crossed(series: Floats, other: Floats) -> Floats:
    """Sum over dates of the products of two pairs of series (T, 2, B), as three numbers (3, B)."""
    products = np.einsum("tpb,tqb->pqb", series, other)
    return np.stack([products[0, 0], (products[0, 1] + products[1, 0]) / 2.0, products[1, 1]])


def crossed_rows(rows: Floats, other: Floats) -> Floats:
    """The same over rows (2, T, N, B)."""
    first, last = (np.einsum("tnb,tnb->b", rows[at], other[at]) for at in (0, 1))
    cross = np.einsum("tnb,tnb->b", rows[0], other[1]) + np.einsum("tnb,tnb->b", rows[1], other[0])
    return np.stack([first, cross / 2.0, last])


def before(values: Floats, lags: int) -> Floats:
    """Sum of the `lags` dates before each date (T, ...)."""
    total, running = np.zeros_like(values), np.zeros(values.shape[1:])
    for t in range(1, len(values)):
        running += values[t - 1]
        if t > lags:
            running -= values[t - 1 - lags]
        total[t] = running
    return total


def bartlett(series: Floats, lags: int) -> Floats:
    """Bartlett sums (3, B) of a pair of series (T, 2, B).

    sum_l (1 - l/(L+1)) G_l over both signs of l is the sum of the squared sums over every L + 1 dates, over L + 1.
    """
    width = lags + 1
    padded = np.concatenate([series, np.zeros((width, *series.shape[1:]))])
    return crossed(sums := before(padded, width), sums) / width


def rectangular(series: Sequence[Floats], lags: int) -> Floats:
    """G_0 + sum_{l=1..L} (G_l + G_l') of J pairs of series (T, 2, B), as three numbers each (J, J, 3, B)."""
    earlier = [before(part, lags) for part in series]
    rows = [
        np.stack([crossed(s, o) + crossed(s, b) + crossed(a, o) for o, b in zip(series, earlier, strict=True)])
        for s, a in zip(series, earlier, strict=True)
    ]
    return np.stack(rows)


def _classical(parts: Parts, one: Offer) -> Found:
    estimate, rows = parts.frame.estimate, parts.squares.residual
    bread = np.einsum("tnb,tnb->b", parts.squares.moved[0], parts.squares.moved[0])
    return Plain(parts.squares.slope, _factor(parts, one) * bread * crossed_rows(rows, rows) / estimate.n_obs)


def _robust(parts: Parts, one: Offer) -> Found:
    return Plain(parts.squares.slope, _factor(parts, one) * _sums(parts).row[0])


def _of_cosines(parts: Parts, one: Offer) -> Found:
    own = one.kind == "cosine"
    way, cosines = (parts.squares if own else parts.carried), parts.frame.cosines[0 if own else 1]
    assert way is not None
    series = way.influence(0)[cosines.span]
    # Not by a matrix product, whose threads would wait for those of the other chunks.
    loads = np.einsum("jt,tpb->jpb", cosines.loads, series)
    return Plain(way.slope, _factor(parts, one) * crossed(loads, loads))


def _of_bartlett(parts: Parts, one: Offer) -> Found:
    return Plain(parts.squares.slope, _factor(parts, one) * bartlett(parts.squares.influence(0), one.lags))


def _of_null(parts: Parts, one: Offer) -> Found:
    own = one.kind == "one-period"
    way, series = (parts.squares, parts.null) if own else (parts.carried, parts.carried_null)
    assert way is not None
    assert series is not None
    return Plain(way.slope, _factor(parts, one) * crossed(series, series))


def _by_bias(parts: Parts, one: Offer) -> Found:
    assert parts.null is not None
    assert parts.shift is not None
    return Shifted(parts.squares.slope, _factor(parts, one) * crossed(parts.null, parts.null), parts.shift)


def _rectangular(parts: Parts, one: Offer) -> Found:
    series = [parts.squares.influence(term) for term in range(len(parts.squares.moved))]
    whole = rectangular(series, one.lags)
    squares = np.stack([crossed(s, s) for s in series])
    stands = bartlett(series[0], one.lags) if parts.null is None else crossed(parts.null, parts.null)
    factor = _factor(parts, one)
    return Rectangular(parts.squares.slope, factor * whole, factor * squares, factor * stands)


def _by_entity(parts: Parts, one: Offer) -> Found:
    return Plain(parts.squares.slope, _cluster_scale(parts, one, "entity") * _sums(parts).entity[0])


def _by_date(parts: Parts, one: Offer) -> Found:
    return Plain(parts.squares.slope, _cluster_scale(parts, one, "date") * _sums(parts).date[0])


def _by_both(parts: Parts, one: Offer) -> Found:
    sums = _sums(parts)
    entity, date, row = (_cluster_scale(parts, one, name) for name in ("entity", "date", "row"))
    return TwoWay(parts.squares.slope, entity * sums.entity, date * sums.date, row * sums.row)


def _by_both_lagged(parts: Parts, one: Offer) -> Found:
    entity, date, row = (_cluster_scale(parts, one, name) for name in ("entity", "date", "row"))
    weighted, whole, sums = [], [], _sums(parts)
    for term in range(len(parts.squares.moved)):
        rows, series = parts.squares.rows(term), parts.squares.influence(term)
        weighted.append(date * bartlett(series, one.lags))
        earlier = np.stack([before(part, one.lags) for part in rows])
        own = sums.row[term] + 2.0 * crossed_rows(rows, earlier)
        common = rectangular([series], one.lags)[0, 0]
        whole.append(entity * sums.entity[term] + date * common - row * own)
    return Lagged(parts.squares.slope, entity * sums.entity, np.stack(weighted), np.stack(whole))


def _sums(parts: Parts) -> RowSums:
    assert parts.sums is not None
    return parts.sums


def _factor(parts: Parts, one: Offer) -> float:
    estimate = parts.frame.estimate
    return estimate.n_obs / (estimate.n_obs - estimate.parameters) if one.factor == "n/(n-k)" else 1.0


def _cluster_scale(parts: Parts, one: Offer, block: str) -> float:
    """Finite-sample factor of one block of clusters, as `clustered` and `clustered_lagged` set it."""
    estimate = parts.frame.estimate
    by = "both" if one.kind.startswith("clustered: both") else one.kind.removeprefix("clustered: ")
    sizes = {"entity": estimate.n_entities, "date": estimate.n_dates, "row": estimate.n_obs}
    smallest = min(sizes[name] for name in (("entity", "date") if by == "both" else (by,)))
    groups = sizes[block] if one.factor == "clusters" else smallest
    return cluster_factor(one.factor, estimate.n_obs, counted_parameters(estimate, by), groups)  # type: ignore[arg-type]


KINDS: Mapping[str, Callable[[Parts, Offer], Found]] = MappingProxyType(
    {
        BY_BIAS: _by_bias,
        "classical": _classical,
        "robust": _robust,
        "bartlett": _of_bartlett,
        "bartlett, fixed-b": _of_bartlett,
        "rectangular": _rectangular,
        "cosine": _of_cosines,
        "one-period": _of_null,
        "instrument": _of_null,
        "instrument, cosine": _of_cosines,
        "clustered: entity": _by_entity,
        "clustered: date": _by_date,
        "clustered: both": _by_both,
        "clustered: both, lagged": _by_both_lagged,
    }
)
