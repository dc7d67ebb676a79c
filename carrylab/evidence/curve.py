"""More of the curve beside the signal: components, all forward rates at once, one combination for all maturities."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.data.calendar import Tenor, parse_tenor
from carrylab.errors import InferenceError, SampleError
from carrylab.evidence.case import Case, Curve
from carrylab.evidence.setting import Fit, Row, tested
from carrylab.evidence.stack import fallback_cosines
from carrylab.options import Questions
from carrylab.regression.fit import Estimate, fit
from carrylab.regression.longrun import longrun
from carrylab.regression.sample import Floats, Sample, make_sample
from carrylab.regression.single_index import single_index
from carrylab.regression.wald import Wald, restrictions, wald

ADD_NOTHING, ONE_FOR_ALL = "components add nothing", "one combination for all maturities"


@dataclass(frozen=True, eq=False, slots=True)
class Bonds:
    """Signals and excess returns (T, E, M) of one parity's maturities by economy, on one calendar."""

    fit: Fit
    maturities: tuple[str, ...]
    signals: Floats
    returns: Floats


def curve_rows(case: Case, asked: Questions) -> list[Row]:
    """Rows of section `curve`, for the forward-spot parity of a bond market."""
    if asked.components is None or case.curve is None:
        return []
    bonds = by_maturity(case.pooled, case.curve.economies)
    place = case.pooled.place() | {"section": "curve", "n_entities": len(case.curve.economies)}
    return [place | row for row in (*_components(bonds, case.curve, asked.components), *_forwards(bonds, case.curve))]


def by_maturity(one: Fit, economies: Sequence[str]) -> Bonds:
    """The entities of a bond parity, economy by maturity, as arrays of both."""
    entities = one.parity.entities
    maturities = tuple(dict.fromkeys(entity.maturity for entity in entities))
    shape = (len(one.sample.mask), len(economies), len(maturities))
    signals, returns = np.full(shape, np.nan), np.full(shape, np.nan)
    at = one.leg_of("return") or 0
    for i, entity in enumerate(entities):
        place = economies.index(entity.economy), maturities.index(entity.maturity)
        here = one.sample.mask[:, i]
        signals[here, place[0], place[1]] = one.sample.x[here, i, 0]
        returns[here, place[0], place[1]] = one.sample.y[here, i, at]
    return Bonds(one, maturities, signals, returns)


def principal_components(yields: Floats, count: int) -> tuple[Floats, Floats]:
    """First `count` components (T, E, count) of yields (T, E, M), and the share of variance of each (count,).

    Weights are eigenvectors of the covariance over all dates and economies, each economy's means taken out; the
    largest weight of each is positive.
    """
    stands = np.asarray(np.isfinite(yields).all(axis=2))
    number = np.maximum(stands.sum(axis=0), 1)[:, None]
    means = np.where(stands[:, :, None], yields, 0.0).sum(axis=0) / number
    centred = yields - means
    rows = centred[stands]
    values, vectors = np.linalg.eigh(rows.T @ rows)
    order = np.argsort(values)[::-1][:count]
    weights = vectors[:, order]
    weights *= np.sign(weights[np.abs(weights).argmax(axis=0), range(len(order))])
    return centred @ weights, values[order] / values.sum()


def forward_rates(yields: Floats, years: Floats) -> Floats:
    """Forward rates per year (T, E, M) between the maturities; the first is the shortest yield itself."""
    prices = yields * years
    found = np.diff(prices, axis=2) / np.diff(years)
    return np.concatenate([yields[:, :, :1], found], axis=2)


def _sample(bonds: Bonds, x: Floats, terms: Sequence[str], legs: Sequence[int]) -> Sample:
    """Returns of some maturities on terms (T, E, K)."""
    one = bonds.fit.sample
    return make_sample(
        x,
        bonds.returns[:, :, list(legs)],
        terms=terms,
        legs=[bonds.maturities[leg] for leg in legs],
        steps=one.steps,
        overlap=one.overlap,
        one_step=[None] * len(legs),
        label=f"{one.label}, curve",
    )


def _components(bonds: Bonds, curve: Curve, count: int) -> Iterator[Row]:
    """Each maturity's return on its own signal, then with the components of the curve beside it."""
    found, shares = principal_components(curve.yields, min(count, curve.yields.shape[2]))
    names = [f"component {number}" for number in range(1, len(shares) + 1)]
    for name, share in zip(names, shares, strict=True):
        yield {"term": f"{name}, share of variance", "estimate": float(share)}
    for leg, maturity in enumerate(bonds.maturities):
        own = bonds.signals[:, :, leg : leg + 1]
        try:
            both = _sample(bonds, np.concatenate([own, found], axis=2), ("signal", *names), [leg])
            whole = fit(both, effects=bonds.fit.estimate.effects)
            alone = fit(_alone(both), effects=bonds.fit.estimate.effects)
        except SampleError as refused:
            yield {"group": maturity, "term": ADD_NOTHING, "note": str(refused)}
            continue
        yield from ({"group": maturity} | row for row in _added(bonds.fit, both, (alone, whole)))


def _alone(sample: Sample) -> Sample:
    """The same rows with the signal alone."""
    mask = sample.mask[:, :, None]
    return make_sample(
        np.where(mask, sample.x[:, :, :1], np.nan),
        np.where(mask, sample.y, np.nan),
        terms=sample.terms[:1],
        legs=sample.legs,
        steps=sample.steps,
        overlap=sample.overlap,
        one_step=sample.one_step,
        label=sample.label,
    )


def _added(one: Fit, sample: Sample, fits: tuple[Estimate, Estimate]) -> Iterator[Row]:
    """Slopes, R2 without and with, and the test that what was added is zero."""
    alone, whole = fits
    count = len(sample.terms)
    series, values = whole.influence[:, :count, 0], whole.coefficients[:count, 0]
    run = longrun(series, "cosine", lags=sample.overlap)
    errors = np.sqrt(np.diag(run.covariance))
    for term, value, error in zip(sample.terms, values, errors, strict=True):
        yield {"term": term, **tested(float(value), float(error), 0.0, run.df, one.confidence), "lags": run.cosines}
    yield {"term": "R2 of the signal alone", "estimate": float(alone.r2[0]), "n_obs": alone.n_obs}
    gain = float(whole.r2[0] - alone.r2[0])
    yield {"term": "R2 added", "estimate": gain, "n_obs": whole.n_obs}
    matrix = np.eye(count)[1:]
    yield {"term": ADD_NOTHING, "n_obs": whole.n_obs} | _tested(
        series, values, (sample.terms[1:], matrix), sample.overlap
    )


def _tested(series: Floats, values: Floats, what: tuple[Sequence[str], Floats], overlap: int) -> Row:
    """Columns of a joint test by cosines and F, or why there is none."""
    try:
        cosines = fallback_cosines(series, overlap)
        found = wald(series, values, restrictions(*what), kind="cosine", lags=overlap, cosines=cosines)
    except InferenceError as refused:
        return {"note": str(refused)}
    return joint_columns(found, overlap)


def joint_columns(found: Wald, overlap: int) -> Row:
    """Columns of a joint test by cosines and F."""
    return {
        "statistic": found.statistic,
        "df": found.df_denominator,
        "p_value": found.p_value,
        "lags": found.cosines,
        "method": f"{found.law} from {found.cosines} equal-weighted cosines, overlap {overlap}",
    }


def _forwards(bonds: Bonds, curve: Curve) -> Iterator[Row]:
    """All maturities' returns on all forward rates, and one combination of these for all maturities."""
    x = forward_rates(curve.yields, np.array([tenor.years for tenor in curve.tenors]))
    names = _names(curve.tenors)
    try:
        sample = _sample(bonds, x, names, range(len(bonds.maturities)))
        found = fit(sample, effects=bonds.fit.estimate.effects)
    except SampleError as refused:
        yield {"term": ONE_FOR_ALL, "note": str(refused)}
        return
    size = {"n_obs": found.n_obs}
    for maturity, r2 in zip(bonds.maturities, found.r2, strict=True):
        yield size | {"group": maturity, "term": "R2 of all forward rates", "estimate": float(r2)}
    yield from (size | row for row in _one_for_all(bonds, sample, found))


def _names(tenors: Sequence[Tenor]) -> list[str]:
    pairs = [f"forward {first} to {second}" for first, second in itertools.pairwise(tenors)]
    return [f"yield {tenors[0]}", *pairs]


def _one_for_all(bonds: Bonds, sample: Sample, found: Estimate) -> Iterator[Row]:
    """The combination, the loading of each maturity (mean one), and the test of the restriction."""
    K = len(sample.terms)
    slopes, series = found.coefficients[:K], found.influence[:, :K]
    stacked = series.transpose(0, 2, 1).reshape(len(series), -1)
    overlap = sample.overlap
    try:
        index = single_index(slopes, series)
        run = longrun(index.influence, "cosine", lags=overlap)
        cosines = fallback_cosines(stacked, overlap)
        test = wald(stacked, slopes.T.reshape(-1), index.hypothesis, kind="cosine", lags=overlap, cosines=cosines)
    except InferenceError as refused:
        yield {"term": ONE_FOR_ALL, "note": str(refused)}
        return
    errors = np.sqrt(np.diag(run.covariance))
    values = np.concatenate([index.combination, index.loadings])
    places = [{"term": name} for name in sample.terms]
    places += [{"group": maturity, "term": "loading on one combination"} for maturity in bonds.maturities]
    for place, value, error in zip(places, values, errors, strict=True):
        yield place | tested(float(value), float(error), 0.0, run.df, bonds.fit.confidence) | {"lags": run.cosines}
    note = "single index (Cochrane and Piazzesi 2005), minimum distance with diagonal weights"
    yield {"term": ONE_FOR_ALL, **joint_columns(test, overlap), "note": note}


def knots(horizon: Tenor, entities: Sequence[str]) -> list[Tenor]:
    """The maturities that the curve is read at: the horizon, and every maturity of the parity."""
    return sorted({horizon, *(parse_tenor(name) for name in entities)})
