"""The headline: slopes of every leg with their errors, the shares, and the two hypotheses."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from carrylab.evidence.setting import Fit, Row, doubt, judged
from carrylab.markets.parity import Leg
from carrylab.regression.covariance import Errors
from carrylab.regression.law import critical
from carrylab.regression.ratio import ratio_interval
from carrylab.regression.sample import Floats
from carrylab.regression.shares import Quantity, Shares, shares

NO_NULL = "no null of its own; the joint null is that all other weighted slopes sum to one"


def share_rows(fit: Fit, *, drawn: bool = False) -> list[Row]:
    """Every row of section `shares` for one fit; `drawn`: draws under the null take the place they were given."""
    given = fit.errors.draws if drawn else "beside"
    rows = list(_coefficients(fit, fit.headline, "headline"))
    if fit.has_identity:
        rows += [row for row in _quantities(fit) if not (given == "headline" and row["term"] == "nothing paid")]
    # Where draws come first, what would have been the test without them stands beside them.
    second = fit.errors.test if given == "headline" else fit.errors.second
    rows += [row for row in _second_opinion(fit, second) if not (given == "second opinion" and row["role"] == "return")]
    place = fit.place() | {"section": "shares"}
    return [place | row for row in rows]


def parity_shares(fit: Fit) -> Shares:
    """Shares of a fit whose legs all have weights, with their influence series."""
    roles = [leg.role for leg in fit.parity.legs]
    estimate = fit.headline.estimate
    return shares(estimate.coefficients[0], estimate.influence[:, 0], fit.weights, roles)


def _coefficients(fit: Fit, errors: Errors, rank: str) -> Iterator[Row]:
    for at in range(len(fit.parity.legs)):
        for k, term in enumerate(fit.estimate.terms):
            row = _coefficient(fit, errors, (k, at), rank)
            yield row | _of_signal(fit, errors, at) if term == "signal" else row


def _coefficient(fit: Fit, errors: Errors, where: tuple[int, int], rank: str) -> Row:
    k, at = where
    leg, term = fit.parity.legs[at], fit.estimate.terms[k]
    null = _null(leg, fit.has_identity) if term == "signal" else 0.0
    value, error = float(errors.estimate.coefficients[k, at]), float(errors.std_error[k, at])
    return {
        "rank": rank,
        "leg": leg.name,
        "role": leg.role,
        "term": term,
        **judged(errors, at, value, error, null, fit.confidence),
        "lags": errors.lags[at],
        "method": fit.method(errors, at),
        "note": doubt(fit, errors, at),
    }


def _null(leg: Leg, identity: bool) -> float:
    if leg.null is not None:
        return leg.null
    return math.nan if identity else 0.0


def _of_signal(fit: Fit, errors: Errors, at: int) -> Row:
    leg, value = fit.parity.legs[at], float(errors.estimate.coefficients[0, at])
    return {
        "weight": leg.weight,
        "share": None if leg.weight is None else leg.weight * value,
        "r2": float(fit.estimate.r2[at]),
        "note": _joined(doubt(fit, errors, at), NO_NULL if leg.null is None and fit.has_identity else ""),
    }


def _joined(*notes: str) -> str:
    return "; ".join(note for note in notes if note)


def _second_opinion(fit: Fit, errors: Errors) -> list[Row]:
    """The signal's rows again by other errors, and the test that nothing is paid, where they are another kind."""
    rows: list[Row] = []
    if errors is fit.headline and fit.errors.test is fit.headline:
        return rows
    for at, leg in enumerate(fit.parity.legs):
        row = _coefficient(fit, errors, (0, at), "second opinion") | _of_signal(fit, errors, at)
        rows.append(row)
        if leg.role == "return" and leg.weight is not None and fit.has_identity:
            rows.append(row | {"term": "nothing paid", **_nothing_paid(fit, errors, at)})
    return rows


def _nothing_paid(fit: Fit, errors: Errors, at: int) -> Row:
    """The return leg's share by some errors and its test against zero."""
    weight = fit.weights[at]
    value, error = weight * errors.estimate.coefficients[0, at], abs(weight) * errors.std_error[0, at]
    return judged(errors, at, float(value), float(error), 0.0, fit.confidence)


def _quantities(fit: Fit) -> Iterator[Row]:
    found = parity_shares(fit)
    yield {
        "rank": "headline",
        "term": "sum of shares",
        "estimate": found.total.value,
        "null": 1.0,
        "note": "an identity: it has no sampling error",
    }
    yield _resolved(fit, found)
    at = fit.leg_of("return")
    if at is not None:
        nothing = _coefficient(fit, fit.errors.test, (0, at), "headline")
        why = f"; chosen because {fit.errors.why}" if fit.errors.why else ""
        yield nothing | {
            "term": "nothing paid",
            **_nothing_paid(fit, fit.errors.test, at),
            "method": nothing["method"] + why,
        }
    if fit.leg_of("fundamental") is not None:
        all_paid = _combination(fit, found.expectation)
        yield all_paid | {"term": "all paid", "note": _joined(all_paid["note"], "null: nothing comes true")}


def _scaled(premium: Quantity, errors: Errors, at: int, confidence: float) -> Row:
    error = abs(float(premium.gradient[at])) * float(errors.std_error[0, at])
    return judged(errors, at, premium.value, error, 0.0, confidence)


def _slope_covariance(errors: Errors, legs: int) -> Floats:
    """Covariance of the signal's slopes across legs (L, L)."""
    return errors.covariance[:legs, :legs]


def _combination(fit: Fit, quantity: Quantity) -> Row:
    """A sum of weighted slopes, with errors valid away from the null."""
    covariance = _slope_covariance(fit.away, len(fit.parity.legs))
    variance = float(quantity.gradient @ covariance @ quantity.gradient)
    at = int(np.flatnonzero(quantity.gradient)[0])
    return {
        "rank": "headline",
        **judged(fit.away, at, quantity.value, math.sqrt(max(variance, 0.0)), 0.0, fit.confidence),
        "lags": fit.away.lags[at],
        "method": fit.method(fit.away, at),
        "note": doubt(fit, fit.away, at),
    }


def _resolved(fit: Fit, found: Shares) -> Row:
    """Premium over all that is not carried over; a ratio's interval inverts the linear restriction."""
    at = fit.leg_of("return")
    if at is not None and not found.carried_over.gradient.any():
        own = _coefficient(fit, fit.headline, (0, at), "headline")
        own |= _scaled(found.premium, fit.headline, at, fit.confidence)
        return own | {"leg": "", "role": "", "term": "resolved premium share"}
    row = _combination(fit, found.resolved) | {"term": "resolved premium share"}
    gradients = np.array([found.premium.gradient, -found.carried_over.gradient])
    covariance = gradients @ _slope_covariance(fit.away, len(fit.parity.legs)) @ gradients.T
    first = int(np.flatnonzero(found.resolved.gradient)[0])
    reach = float(critical(fit.confidence, row["df"], float(fit.away.bandwidth[first])))
    interval = ratio_interval(found.premium.value, 1.0 - found.carried_over.value, covariance, reach)
    note = "interval by inverting the linear restriction (Fieller 1954)"
    if interval.kind != "interval":
        note += f"; it is the {interval.kind}: the carried-over share may be one"
    return row | {"lower": interval.lower, "upper": interval.upper, "note": note}
