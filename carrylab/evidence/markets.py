"""Across markets: every signal against every market's return, fitted premia together, and one factor for all."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError, SampleError
from carrylab.evidence.case import Case
from carrylab.evidence.setting import Fit, Row, judged, tested
from carrylab.evidence.stack import fallback_cosines
from carrylab.options import Questions
from carrylab.regression.covariance import ErrorOptions, Errors, standard_errors
from carrylab.regression.fit import Estimate, fit
from carrylab.regression.longrun import longrun
from carrylab.regression.sample import Floats, OneStep, Sample, make_sample
from carrylab.regression.single_index import single_index
from carrylab.regression.wald import wald

FACTOR = "one factor carries all premia"


@dataclass(frozen=True, eq=False, slots=True)
class Together:
    """Market averages on one calendar of T dates and M markets.

    `signals` and `fitted` premia (T, M), `sample`: all returns as legs on all signals as terms, the dates that all
    markets share.
    """

    fits: tuple[Fit, ...]
    signals: Floats
    fitted: Floats
    sample: Sample

    @property
    def names(self) -> list[str]:
        """The markets."""
        return [one.parity.market for one in self.fits]


def across_market_rows(cases: Sequence[Case], asked: Questions) -> list[Row]:
    """Rows of section `across` for the markets' own spreads of the same horizon and interval."""
    if not asked.across:
        return []
    own = {case.parity.market: case.parity.name for case in reversed(cases)}
    kept = [case.pooled for case in cases if case.parity.name == own[case.parity.market]]
    kept = [one for one in kept if one.leg_of("return") is not None]
    places: dict[tuple[str, str], list[Fit]] = {}
    for one in kept:
        places.setdefault((str(one.parity.horizon), one.parity.calendar.interval), []).append(one)
    return [row for fits in places.values() if len(fits) > 1 for row in _rows(fits)]


def _rows(fits: list[Fit]) -> Iterator[Row]:
    place: Row = {
        "section": "across",
        "parity": "each market's own spread",
        "horizon": str(fits[0].parity.horizon),
        "interval": fits[0].parity.calendar.interval,
        "group": "market averages",
        "sample": "all",
    }
    together = gathered(fits)
    try:
        found = fit(together.sample, effects="none")
    except SampleError as refused:
        yield place | {"term": "signal", "note": str(refused)}
        return
    numbers = np.unique(np.concatenate([one.parity.calendar.ordinals for one in fits]))
    calendar = fits[0].parity.calendar
    place |= {"n_dates": found.n_dates, "n_entities": len(fits), "n_obs": found.n_obs}
    if np.array_equal(numbers, calendar.ordinals):
        place |= {"first": calendar.label(found.first), "last": calendar.label(found.last)}
    yield from (place | row for row in _matrix(together))
    yield from (place | row for row in _premia(together))
    yield from (place | row for row in _factor(together, found))


def gathered(fits: Sequence[Fit]) -> Together:
    """Means over entities of signal, return and one-period returns, market by market, on the joint calendar."""
    numbers = np.unique(np.concatenate([one.parity.calendar.ordinals for one in fits]))
    count = len(numbers)
    signals, fitted, returns = (np.full((count, len(fits)), np.nan) for _ in range(3))
    outcomes: list[OneStep | None] = []
    for m, one in enumerate(fits):
        rows = np.searchsorted(numbers, one.parity.calendar.ordinals)
        at = one.leg_of("return") or 0
        mask = one.sample.mask
        signals[rows, m] = _mean(one.sample.x[:, :, 0], mask)
        within = one.sample.x[:, :, 0] - one.estimate.absorbed.entity[:, 0]
        fitted[rows, m] = one.estimate.coefficients[0, at] * _mean(within, mask)
        returns[rows, m] = _mean(one.sample.y[:, :, at], mask)
        outcomes.append(_outcomes(one, at, rows, count))
    longest = max(fits, key=lambda one: one.sample.overlap)
    steps = np.zeros(count, dtype=np.int64)
    steps[np.searchsorted(numbers, longest.parity.calendar.ordinals)] = longest.sample.steps
    sample = make_sample(
        signals[:, None],
        returns[:, None],
        terms=[f"signal of {one.parity.market}" for one in fits],
        legs=[f"return of {one.parity.market}" for one in fits],
        steps=steps,
        overlap=longest.sample.overlap,
        one_step=outcomes,
        label="market averages",
    )
    return Together(tuple(fits), signals, fitted, sample)


def _mean(values: Floats, mask: np.ndarray) -> Floats:
    """Mean over the entities in use (T,), NaN where there is none."""
    count = mask.sum(axis=1)
    mean: Floats = np.divide((values * mask).sum(axis=1), count, out=np.full(len(values), np.nan), where=count > 0)
    return mean


def _outcomes(one: Fit, at: int, rows: np.ndarray, count: int) -> OneStep | None:
    """One-period outcomes averaged over entities, (T, 1) or (T, 1, H)."""
    outcome = one.sample.one_step[at]
    if outcome is None:
        return None
    stands = np.isfinite(outcome.outcomes)
    number = stands.sum(axis=1)
    total = np.where(stands, outcome.outcomes, 0.0).sum(axis=1)
    mean = np.divide(total, number, out=np.full(total.shape, np.nan), where=number > 0)
    placed = np.full((count, 1, *mean.shape[1:]), np.nan)
    placed[rows, 0] = mean
    return OneStep(placed, outcome.weights)


def _matrix(together: Together) -> Iterator[Row]:
    """Each signal alone against every return: slope, error, R2, and p by the instrument."""
    for k, one in enumerate(together.fits):
        sample = _alone(together.sample, k)
        found = fit(sample, effects="none")
        errors = standard_errors(sample, found, ErrorOptions("auto"))
        test = _instrument(sample, found, errors)
        yield from (_cell(one, together.fits[leg], (errors, test, found), leg) for leg in range(len(together.fits)))


def _alone(sample: Sample, term: int) -> Sample:
    return make_sample(
        np.where(sample.mask[:, :, None], sample.x[:, :, [term]], np.nan),
        np.where(sample.mask[:, :, None], sample.y, np.nan),
        terms=sample.terms[term : term + 1],
        legs=sample.legs,
        steps=sample.steps,
        overlap=sample.overlap,
        one_step=sample.one_step,
        label=sample.label,
    )


def _instrument(sample: Sample, found: Estimate, otherwise: Errors) -> Errors:
    if all(outcome is None for outcome in sample.one_step):
        return otherwise
    try:
        return standard_errors(sample, found, ErrorOptions("instrument"))
    except (InferenceError, SampleError):
        return otherwise


def _cell(signal: Fit, paid: Fit, made: tuple[Errors, Errors, Estimate], leg: int) -> Row:
    errors, test, found = made
    at = paid.leg_of("return") or 0
    slope, error = float(found.coefficients[0, leg]), float(errors.std_error[0, leg])
    own = judged(errors, leg, slope, error, 0.0, signal.confidence)
    value, spread = float(test.estimate.coefficients[0, leg]), float(test.std_error[0, leg])
    judgement = judged(test, leg, value, spread, 0.0, signal.confidence)
    return {
        "market": signal.parity.market,
        "leg": paid.parity.market,
        "role": paid.parity.legs[at].role,
        "term": "signal",
        **own,
        "p_value": judgement["p_value"],
        "r2": float(found.r2[leg]),
        "method": f"slope and error: {errors.words[leg]}; p: {test.words[leg]}",
    }


def _premia(together: Together) -> Iterator[Row]:
    """Correlations of the fitted premia of every two markets, over the dates that all share."""
    rows = together.sample.mask[:, 0]
    correlations = np.atleast_2d(np.corrcoef(together.fitted[rows].T))
    for i, j in itertools.combinations(range(len(together.fits)), 2):
        yield {
            "market": together.names[i],
            "leg": together.names[j],
            "term": "correlation of fitted premia",
            "estimate": float(correlations[i, j]),
            "note": "of estimates, so without an error; market averages",
        }


def _factor(together: Together, found: Estimate) -> Iterator[Row]:
    """Whether one combination of all signals forecasts every market's return, up to a loading."""
    count = len(together.fits)
    slopes, series = found.coefficients[:count], found.influence[:, :count]
    stacked = series.transpose(0, 2, 1).reshape(len(series), -1)
    overlap = together.sample.overlap
    try:
        index = single_index(slopes, series)
        cosines = fallback_cosines(stacked, overlap)
        test = wald(stacked, slopes.T.reshape(-1), index.hypothesis, kind="cosine", lags=overlap, cosines=cosines)
    except InferenceError as refused:
        yield {"term": FACTOR, "note": str(refused)}
        return
    yield {
        "term": FACTOR,
        "statistic": test.statistic,
        "df": test.df_denominator,
        "p_value": test.p_value,
        "lags": test.cosines,
        "method": f"{test.law} from {test.cosines} equal-weighted cosines, overlap {overlap}; minimum distance",
        "note": "each return on all signals; the slopes of rank one",
    }
    run = longrun(index.influence[:, count:], "cosine", lags=overlap)
    errors = np.sqrt(np.diag(run.covariance))
    for name, loading, error in zip(together.names, index.loadings, errors, strict=True):
        row = tested(float(loading), float(error), 0.0, run.df, together.fits[0].confidence)
        yield {"market": name, "term": "loading on one factor", **row, "note": "loadings have a mean of one"}
