"""From which part of the spread the shares come: static between entities, dynamic within, common to all."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from carrylab.errors import InferenceError, SampleError
from carrylab.evidence.case import Case
from carrylab.evidence.setting import Fit, Row, tested
from carrylab.evidence.stack import fallback_cosines
from carrylab.options import Questions
from carrylab.regression.longrun import longrun
from carrylab.regression.parts import PARTS, Parts, parts
from carrylab.regression.sample import Floats, Sample, make_sample
from carrylab.regression.wald import restrictions, wald

BASE = "home as zeros"
ALL_EQUAL = "all parts equal"


def part_rows(case: Case, asked: Questions) -> list[Row]:
    """Rows of section `parts` for the pooled sample, and for currencies again with the home currency as zeros."""
    if not asked.parts:
        return []
    fit = case.pooled
    samples = {"all": fit.sample}
    if _quoted_against_home(fit):
        samples[BASE] = with_base(fit.sample)
    return [row for name, sample in samples.items() for row in _of_sample(fit, sample, name)]


def _quoted_against_home(fit: Fit) -> bool:
    first = fit.parity.entities[0]
    return bool(first.currency) and not (first.maturity or first.index)


def with_base(sample: Sample) -> Sample:
    """The sample with one more entity whose signal and legs are zero on every date in use: the base itself."""
    mask = sample.mask
    here = np.where(mask.any(axis=1), 0.0, np.nan)[:, None]
    x = np.where(mask[:, :, None], sample.x[:, :, :1], np.nan)
    y = np.where(mask[:, :, None], sample.y, np.nan)
    return make_sample(
        np.concatenate([x, here[:, :, None]], axis=1),
        np.concatenate([y, np.repeat(here[:, :, None], y.shape[2], axis=2)], axis=1),
        terms=sample.terms[:1],
        legs=sample.legs,
        steps=sample.steps,
        overlap=sample.overlap,
        one_step=[None] * y.shape[2],
        label=sample.label,
    )


def _of_sample(fit: Fit, sample: Sample, name: str) -> list[Row]:
    one = replace(fit, name=name)
    place = one.place() | {"section": "parts", "n_entities": int(sample.mask.any(axis=0).sum())}
    place |= {"n_obs": int(sample.mask.sum())}
    try:
        found = parts(sample)
    except SampleError as refused:
        return [place | {"term": "static", "note": str(refused)}]
    return [place | row for row in (*_shares_of_variance(found), *_slopes(one, sample, found))]


def _shares_of_variance(found: Parts) -> Iterator[Row]:
    note = "" if found.balanced else "the panel is not balanced: shares of variance only nearly"
    for part, share in zip(PARTS, found.shares, strict=True):
        yield {"term": f"{part}, share of variance", "estimate": float(share), "note": note}


def _slopes(fit: Fit, sample: Sample, found: Parts) -> Iterator[Row]:
    """Slope of every leg by part, the pooled slope that they make, and the test that a leg's parts are equal."""
    for at, leg in enumerate(fit.parity.legs):
        place = {"leg": leg.name, "role": leg.role, "weight": leg.weight}
        series = found.influence[:, :, at]
        stands = np.isfinite(found.slopes[:, at])
        run = longrun(series[:, stands], "cosine", lags=sample.overlap)
        errors = np.full(len(PARTS), math.nan)
        errors[stands] = np.sqrt(np.diag(run.covariance))
        method = f"no effects; equal-weighted cosines, {run.cosines} cosines"
        for part, slope, error in zip(PARTS, found.slopes[:, at], errors, strict=True):
            if math.isnan(slope):
                yield place | {"term": part, "note": f"the signal has no {part} part"}
                continue
            row = tested(float(slope), float(error), math.nan if leg.null is None else leg.null, run.df, fit.confidence)
            share = None if leg.weight is None else leg.weight * float(slope)
            yield place | row | {"term": part, "share": share, "lags": run.cosines, "method": method}
        pooled = float(found.pooled[at])
        yield place | {"term": "pooled, no effects", "estimate": pooled, "note": "the parts' slopes by their shares"}
        if stands.all():
            yield place | _equal(series, found.slopes[:, at], sample.overlap)


def _equal(series: Floats, slopes: Floats, overlap: int) -> Row:
    """The test that the three slopes of one leg are one, with at most half as many cosines as independent windows."""
    matrix = np.array([[1.0, -1.0, 0.0], [1.0, 0.0, -1.0]])
    names = [f"{PARTS[0]} = {other}" for other in PARTS[1:]]
    cosines = fallback_cosines(series, overlap)
    try:
        found = wald(series, slopes, restrictions(names, matrix), kind="cosine", lags=overlap, cosines=cosines)
    except InferenceError as refused:
        return {"term": ALL_EQUAL, "note": str(refused)}
    return {
        "term": ALL_EQUAL,
        "statistic": found.statistic,
        "df": found.df_denominator,
        "p_value": found.p_value,
        "lags": found.cosines,
        "method": f"{found.law} from {found.cosines} equal-weighted cosines, overlap {overlap}",
    }
