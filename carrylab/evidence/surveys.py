"""What a survey of the fundamental says of the premium: required, a forecast error, or expected to come true."""

from __future__ import annotations

import numpy as np

from carrylab.errors import SampleError
from carrylab.evidence.case import Case, Expected
from carrylab.evidence.setting import Fit, Row, judged
from carrylab.options import Questions
from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.fit import fit
from carrylab.regression.sample import Sample, make_sample

REQUIRED, FORECAST_ERROR, EXPECTED, PAID, TRUE = (
    "required premium",
    "forecast error",
    "expected fundamental",
    "paid as excess return",
    "came true",
)


def survey_rows(case: Case, _asked: Questions) -> list[Row]:
    """Rows of section `surveys` for every survey of one of the parity's legs over its horizon."""
    return [row for survey in case.surveys for row in _rows(case, survey)]


def _rows(case: Case, survey: Expected) -> list[Row]:
    """Slopes of the parts on the signal, pooled, on the rows where the survey stands too."""
    one, leg = case.pooled, case.parity.legs[survey.leg]
    at = one.leg_of("return")
    place = one.place() | {"section": "surveys", "leg": leg.name, "role": leg.role}
    if at is None or leg.weight is None or leg.role == "return":
        why = "a survey splits a fundamental leg of a parity whose legs have weights; this one is none"
        return [place | {"term": REQUIRED, "note": why}]
    sample = parts_sample(one, survey, at)
    try:
        found = fit(sample, effects=one.estimate.effects)
    except SampleError as refused:
        return [place | {"term": REQUIRED, "note": str(refused)}]
    errors = standard_errors(sample, found, ErrorOptions("cosine"))
    calendar = case.parity.calendar
    place |= {
        "n_dates": found.n_dates,
        "n_entities": found.n_entities,
        "n_obs": found.n_obs,
        "first": calendar.label(found.first),
        "last": calendar.label(found.last),
    }
    rows = []
    for number, (term, null) in enumerate(NULLS.items()):
        value, error = float(found.coefficients[0, number]), float(errors.std_error[0, number])
        rows.append(
            place
            | {"term": term, **judged(errors, number, value, error, null, one.confidence)}
            | {"share": value, "r2": float(found.r2[number]), "lags": errors.lags[number]}
            | {"method": one.method(errors, number), "note": MEANING[term]}
        )
    return rows


NULLS = {REQUIRED: 0.0, FORECAST_ERROR: 0.0, EXPECTED: 1.0, PAID: 0.0, TRUE: 1.0}
MEANING = {
    REQUIRED: "zero where the premium that the survey implies does not vary with the signal",
    FORECAST_ERROR: "zero where the survey is unbiased and uses the signal",
    EXPECTED: "one where the survey moves one for one with the signal",
    PAID: "required premium and forecast error together",
    TRUE: "expected fundamental less forecast error",
}


def parts_sample(one: Fit, survey: Expected, at: int) -> Sample:
    """The sample of all parts, each already times its weight, in the order of the nulls.

    With w the weight of the fundamental leg F, S its survey expectation and r the weighted excess return: forecast
    error w (S - F), required premium r - w (S - F), expected fundamental w S. Then required premium + forecast error
    = r, and required premium + w S = r + w F, the signal where there are no other legs.
    Source: Froot and Frankel (1989, QJE 104:139).
    """
    sample, weights = one.sample, one.weights
    paid = weights[at] * sample.y[:, :, at]
    true = weights[survey.leg] * sample.y[:, :, survey.leg]
    expected = weights[survey.leg] * survey.values
    missed = expected - true
    parts = [paid - missed, missed, expected, paid, true]
    mask = sample.mask[:, :, None]
    return make_sample(
        np.where(mask, sample.x, np.nan),
        np.where(mask, np.stack(parts, axis=2), np.nan),
        terms=sample.terms,
        legs=tuple(NULLS),
        steps=sample.steps,
        overlap=sample.overlap,
        one_step=[None] * len(parts),
        label=f"{sample.label}, survey of {sample.legs[survey.leg]}",
    )
