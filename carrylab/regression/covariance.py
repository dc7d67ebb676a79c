"""Standard errors by kind: what is allowed with overlap, the default lag, factor and reference law, all in words."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Literal, cast

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.bias import window_warning
from carrylab.regression.clusters import By, classical, clustered, meats
from carrylab.regression.fit import Estimate
from carrylab.regression.fixedb import bandwidth_lag
from carrylab.regression.instrument import instrument, instrument_null
from carrylab.regression.lagged_clusters import clustered_lagged
from carrylab.regression.longrun import KERNELS, kernel_sum, longrun, used_span
from carrylab.regression.one_period import NullInfluence, null_influence
from carrylab.regression.sample import Floats, Sample

Factor = Literal["none", "n/(n-k)", "clusters", "clusters, one factor"]
Reference = Literal["normal", "t", "fixed-b"]
FEW_CLUSTERS = 40


@dataclass(frozen=True, slots=True)
class ErrorOptions:
    """What the user chose; None means the stated rule of the kind."""

    kind: str = "auto"
    lags: int | None = None
    factor: Factor | None = None
    reference: Reference | None = None


@dataclass(frozen=True, slots=True)
class ErrorKind:
    """One row of the table of error kinds: words in print, default factor and law, and whether overlap is allowed."""

    words: str
    factor: Factor
    reference: Reference
    overlap: bool
    source: str


ERRORS: Mapping[str, ErrorKind] = MappingProxyType(
    {
        "classical": ErrorKind("classical", "n/(n-k)", "t", False, "textbook s^2 (X'X)^-1"),
        "robust": ErrorKind("heteroskedasticity-robust", "n/(n-k)", "t", False, "White (1980, Econometrica 48:817)"),
        "bartlett": ErrorKind(KERNELS["bartlett"].words, "none", "normal", True, KERNELS["bartlett"].source),
        "rectangular": ErrorKind(KERNELS["rectangular"].words, "none", "normal", True, KERNELS["rectangular"].source),
        "bartlett, fixed-b": ErrorKind(
            KERNELS["bartlett"].words,
            "none",
            "fixed-b",
            True,
            "Kiefer and Vogelsang (2005, Econometric Theory 21:1130)",
        ),
        "cosine": ErrorKind(
            "equal-weighted cosines", "none", "t", True, "Mueller (2007); Lazarus, Lewis, Stock and Watson (2018)"
        ),
        "one-period": ErrorKind(
            "Hodrick 1B, one-period outcomes, valid at the null of no premium", "none", "normal", True, "Hodrick (1992)"
        ),
        "instrument": ErrorKind(
            "IVX instrument with one-period scores (our own), valid at the null of no premium",
            "none",
            "normal",
            True,
            "Kostakis, Magdalinos and Stamatogiannis (2015, RFS 28:1506); Hodrick (1992)",
        ),
        "instrument, cosine": ErrorKind(
            "IVX instrument with equal-weighted cosines (our own)",
            "none",
            "t",
            True,
            "Kostakis, Magdalinos and Stamatogiannis (2015, RFS 28:1506); Mueller (2007)",
        ),
        "clustered: entity": ErrorKind("clustered by entity", "clusters", "t", False, "Petersen (2009)"),
        "clustered: date": ErrorKind("clustered by date", "clusters", "t", False, "Petersen (2009)"),
        "clustered: both": ErrorKind(
            "clustered by entity and date",
            "clusters",
            "t",
            False,
            "Cameron, Gelbach and Miller (2011); Thompson (2011)",
        ),
        "clustered: both, lagged": ErrorKind(
            "clustered by entity and date with lags of common shocks",
            "clusters",
            "t",
            True,
            "Thompson (2011, JFE 99:1)",
        ),
    }
)
LAGGED = (*KERNELS, "bartlett, fixed-b", "clustered: both, lagged")
LONG_RUN: Mapping[str, str] = MappingProxyType(
    {"one-period": "date", "instrument": "date", "bartlett, fixed-b": "bartlett", "instrument, cosine": "cosine"}
)
FACTORS: Mapping[str, str] = MappingProxyType(
    {
        "none": "no finite-sample factor",
        "n/(n-k)": "factor n/(n-k)",
        "clusters": "factor G/(G-1) (n-1)/(n-k) for each block",
        "clusters, one factor": "one factor G/(G-1) (n-1)/(n-k) with the fewest clusters",
    }
)


@dataclass(frozen=True, eq=False, slots=True)
class Errors:
    """Covariance of all coefficients and the law of each leg.

    `covariance` (m, m), m = (K+1) L with coefficient (term, leg) at term x L + leg, finite-sample factor included;
    NaN between legs of different kinds, whose joint tests stack influence series instead. `estimate`: the
    coefficients that the errors belong to, least squares or the instrument's own. Per leg: `df` (L,) of the t law
    (infinite: normal), `bandwidth` (L,) of the fixed-b law as a part of the sample (0: another law), `kinds`, `lags`
    (lag of a kernel, number of cosines, else 0), `factors`, `references` and `words`, a sentence fragment.
    `warnings` are sentences.
    """

    estimate: Estimate
    covariance: Floats
    std_error: Floats
    df: Floats
    bandwidth: Floats
    kinds: tuple[str, ...]
    lags: tuple[int, ...]
    factors: tuple[str, ...]
    references: tuple[str, ...]
    words: tuple[str, ...]
    warnings: tuple[str, ...]


@dataclass(frozen=True, eq=False, slots=True)
class _Plan:
    """How one leg's error is made: kind, series (T, K+1), warnings."""

    kind: str
    series: Floats
    warnings: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False, slots=True)
class _Basis:
    """What the errors rest on: an estimate, its scores under the null, and the kinds with and without them."""

    estimate: Estimate
    null: Callable[[int], NullInfluence]
    kind: str
    stand_in: str


@dataclass(frozen=True, eq=False, slots=True)
class _Block:
    """Covariance of some legs of one kind before the factor n/(n-k); `df` and `bandwidth` of its own laws."""

    legs: tuple[int, ...]
    kind: str
    covariance: Floats
    df: float
    lags: int
    warnings: tuple[str, ...] = ()
    bandwidth: float = 0.0


def standard_errors(sample: Sample, estimate: Estimate, options: ErrorOptions) -> Errors:
    """Standard errors of every coefficient of every leg.

    "auto" takes one-period errors (Hodrick 1992, 1B) for legs that have one-period outcomes and cosines capped at
    T/h for the others. Lags default to the overlap and may not be shorter; with fixed-b to the longer of it and the
    rule of `bandwidth_lag`. The two instrument kinds come with an estimate of their own. Kinds that have no lag are
    refused where outcomes overlap unless `lags` is 0, which forces them with a warning.
    Raises InferenceError, one line, for a choice that this sample cannot support.
    """
    warnings = _require_allowed(options, sample.overlap)
    if options.kind in ("classical", "robust") or options.kind.startswith("clustered"):
        blocks = [_from_rows(sample, estimate, options)]
    else:
        basis = _basis(sample, estimate, options.kind)
        estimate = basis.estimate
        plans = [_plan(sample, basis, leg, options) for leg in range(len(sample.legs))]
        _require_one_period(plans, options.kind)
        warnings += tuple(text for plan in plans for text in plan.warnings)
        lags = _lags(sample, estimate, options)
        blocks = [_from_series(plans, kind, lags) for kind in dict.fromkeys(plan.kind for plan in plans)]
    if ERRORS[blocks[0].kind].overlap:
        warnings += window_warning(estimate.last - estimate.first + 1, sample.overlap, [b.kind for b in blocks])
    return _assemble(estimate, blocks, options, warnings)


def scaled(estimate: Estimate, factor: Factor) -> Floats:
    """The influence (T, K+1, L) times the root of the factor: its long-run sum is the printed covariance."""
    return estimate.influence * math.sqrt(_factor_value(estimate, factor))


def _require_allowed(options: ErrorOptions, overlap: int) -> tuple[str, ...]:
    """Refuse a lag below the overlap, and a clustered factor without clusters; a forced short lag is a warning."""
    kind, lags = options.kind, options.lags
    if options.factor in ("clusters", "clusters, one factor") and not kind.startswith("clustered"):
        raise InferenceError(
            f'factor = "{options.factor}" needs clustered errors and errors is "{kind}"; use "none" or "n/(n-k)"'
        )
    if not overlap or kind == "auto":
        return ()
    if not ERRORS[kind].overlap:
        if lags != 0:
            raise InferenceError(
                f'errors = "{kind}" has no lag, but outcomes overlap by {overlap} periods; choose auto, one-period, '
                "cosine or bartlett, or set lags = 0 to force it"
            )
        return (f"{ERRORS[kind].words} errors ignore an overlap of {overlap} periods: they are too small",)
    if kind in LAGGED and lags is not None and lags < overlap:
        raise InferenceError(
            f"lags = {lags} is below the overlap of {overlap} periods; leave lags out or set it to {overlap} or more"
        )
    return ()


def _lags(sample: Sample, estimate: Estimate, options: ErrorOptions) -> int:
    """Lag asked for, at least the overlap; fixed-b has a rule of its own where none is asked for."""
    if options.kind == "bartlett, fixed-b" and options.lags is None:
        return bandwidth_lag(estimate.last - estimate.first + 1, sample.overlap)
    return max(sample.overlap, options.lags or 0)


def _basis(sample: Sample, estimate: Estimate, kind: str) -> _Basis:
    if not kind.startswith("instrument"):
        return _Basis(estimate, lambda leg: null_influence(sample, estimate, leg), "one-period", "cosine")
    found = instrument(sample, estimate)
    return _Basis(found.estimate, lambda leg: instrument_null(found, leg), "instrument", "instrument, cosine")


def _require_one_period(plans: list[_Plan], kind: str) -> None:
    if kind in ("one-period", "instrument") and all(plan.kind != kind for plan in plans):
        raise InferenceError(
            f'errors = "{kind}" needs one-period outcomes and no leg has them; choose auto, cosine or bartlett'
        )


def _plan(sample: Sample, basis: _Basis, leg: int, options: ErrorOptions) -> _Plan:
    """Kind and series of one leg; a kind it cannot have gives way to one it can, in words."""
    name, series = sample.legs[leg], basis.estimate.influence[:, :, leg]
    if options.kind in ("auto", basis.kind):
        return _one_period_plan(sample, basis, leg, wanted=options.kind != "auto")
    if options.kind != "rectangular":
        return _Plan(options.kind, series)
    problem = longrun(series, "rectangular", lags=max(sample.overlap, options.lags or 0)).problem
    if not problem:
        return _Plan("rectangular", series)
    because = problem.split(";")[0]
    stand_in = _one_period_plan(sample, basis, leg, wanted=False)
    if stand_in.kind == "one-period":
        return replace(stand_in, warnings=(f"{name}: {because}; Hodrick 1B stands in its place",))
    return _Plan("bartlett", series, (f"{name}: {problem}",))


def _one_period_plan(sample: Sample, basis: _Basis, leg: int, *, wanted: bool) -> _Plan:
    """1B where the leg has one-period outcomes, else cosines; said aloud where 1B was wanted or has holes."""
    name, series = sample.legs[leg], basis.estimate.influence[:, :, leg]
    if sample.one_step[leg] is None:
        said = (f"{name} has no one-period outcomes, its errors are equal-weighted cosines",) if wanted else ()
        return _Plan(basis.stand_in, series, said)
    try:
        found = basis.null(leg)
    except InferenceError as missing:
        return _Plan(basis.stand_in, series, (f"{missing}; equal-weighted cosines stand in their place",))
    holes = f"{name}: {found.missing} of {found.covered} one-period outcomes are missing and count as no news"
    return _Plan(basis.kind, found.series, (holes,) if found.missing else ())


def _from_series(plans: list[_Plan], kind: str, lags: int) -> _Block:
    """Covariance of all legs of one kind from their stacked series."""
    legs = tuple(leg for leg, plan in enumerate(plans) if plan.kind == kind)
    stacked = np.stack([plans[leg].series for leg in legs], axis=2).reshape(len(plans[0].series), -1)
    dates = float((stacked != 0).any(axis=1).sum() - plans[0].series.shape[1])
    law = LONG_RUN.get(kind, kind)
    if law == "cosine":
        found = longrun(stacked, "cosine", lags=lags)
        return _Block(legs, kind, found.covariance, found.df, found.cosines)
    lags = 0 if law == "date" else lags
    bandwidth = (lags + 1) / max(len(stacked[used_span(stacked)]), lags + 1)
    return _Block(legs, kind, kernel_sum(stacked, law, lags), dates, lags, bandwidth=bandwidth)


def _from_rows(sample: Sample, estimate: Estimate, options: ErrorOptions) -> _Block:
    """Covariance of all legs from single rows; a factor other than n/(n-k) is already inside."""
    kind, legs = options.kind, tuple(range(len(sample.legs)))
    freedom = float(estimate.n_obs - estimate.parameters)
    if kind == "classical":
        return _Block(legs, kind, classical(estimate), freedom, 0)
    if kind == "robust":
        return _Block(legs, kind, meats(sample, estimate).row, freedom, 0)
    lags, factor = 0, options.factor or ERRORS[kind].factor
    if kind == "clustered: both, lagged":
        lags = _lags(sample, estimate, options)
        found = clustered_lagged(sample, estimate, lags, factor)
    else:
        found = clustered(sample, estimate, cast(By, kind.removeprefix("clustered: ")), factor)
    few = f"{kind} rests on {found.clusters} clusters; below {FEW_CLUSTERS} such errors are usually too small"
    said: tuple[str, ...] = (found.problem,) if found.problem else ()
    said += (few,) if found.clusters < FEW_CLUSTERS else ()
    return _Block(legs, kind, found.covariance, found.clusters - 1.0, lags, said)


def _factor_value(estimate: Estimate, factor: Factor) -> float:
    return estimate.n_obs / (estimate.n_obs - estimate.parameters) if factor == "n/(n-k)" else 1.0


def _assemble(estimate: Estimate, blocks: list[_Block], options: ErrorOptions, warnings: tuple[str, ...]) -> Errors:
    """Put the legs' blocks into one matrix, with factor, law and words of each leg."""
    terms, count = estimate.coefficients.shape
    covariance = np.full((terms, count, terms, count), np.nan)
    df, bandwidth, of_leg = np.full(count, math.inf), np.zeros(count), dict[int, _Block]()
    for block in blocks:
        factor, reference = _choices(options, block.kind)
        value = 1.0 if block.kind.startswith("clustered") else _factor_value(estimate, factor)
        part = value * block.covariance.reshape(terms, len(block.legs), terms, len(block.legs))
        covariance[np.ix_(range(terms), block.legs, range(terms), block.legs)] = part
        df[list(block.legs)] = block.df if reference == "t" else math.inf
        bandwidth[list(block.legs)] = block.bandwidth if reference == "fixed-b" else 0.0
        of_leg |= dict.fromkeys(block.legs, block)
        warnings += block.warnings
    flat = covariance.reshape(terms * count, terms * count)
    order = [of_leg[leg] for leg in range(count)]
    chosen = [_choices(options, block.kind) for block in order]
    return Errors(
        estimate=estimate,
        covariance=flat,
        std_error=np.sqrt(np.maximum(np.diag(flat), 0.0)).reshape(terms, count),
        df=df,
        bandwidth=bandwidth,
        kinds=tuple(block.kind for block in order),
        lags=tuple(block.lags for block in order),
        factors=tuple(factor for factor, _ in chosen),
        references=tuple(reference for _, reference in chosen),
        words=tuple(
            _words(block, *choice, df[leg]) for leg, (block, choice) in enumerate(zip(order, chosen, strict=True))
        ),
        warnings=tuple(dict.fromkeys(warnings)),
    )


def _choices(options: ErrorOptions, kind: str) -> tuple[Factor, Reference]:
    row = ERRORS[kind]
    return options.factor or row.factor, options.reference or row.reference


def _words(block: _Block, factor: Factor, reference: Reference, df: float) -> str:
    laws = {
        "normal": "normal",
        "t": f"t with {df:.0f} degrees of freedom",
        "fixed-b": f"fixed-b law at bandwidth {block.bandwidth:.2f} of the sample",
    }
    lag = f", lag {block.lags}" if block.kind in LAGGED else ""
    lag = f", {block.lags} cosines" if LONG_RUN.get(block.kind, block.kind) == "cosine" else lag
    return f"{ERRORS[block.kind].words}{lag}, {FACTORS[factor]}, {laws[reference]}"
