"""The headline: slopes of every leg with their errors, the shares, and the two hypotheses."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from carrylab.evidence.setting import AWAY, Fit, Row, judged
from carrylab.markets.parity import Leg
from carrylab.regression.covariance import Errors
from carrylab.regression.law import critical
from carrylab.regression.ratio import ratio_interval
from carrylab.regression.sample import Floats
from carrylab.regression.shares import Quantity, Shares, shares

NO_NULL = "no null of its own; the joint null is that all other weighted slopes sum to one"


def share_rows(fit: Fit, *, drawn: bool = False) -> list[Row]:
    """Every row of section `shares` for one fit; `drawn`: the return leg's second opinion comes from draws instead."""
    rows = list(_coefficients(fit, fit.headline, "headline"))
    second = _second_opinion(fit)
    if fit.has_identity:
        rows += _quantities(fit)
    rows += [row for row in second if not (drawn and row["role"] == "return")]
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
            if term == "signal":
                row |= _of_signal(fit, errors, at)
            yield row


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
        "note": NO_NULL if leg.null is None and fit.has_identity else "",
    }


def _second_opinion(fit: Fit) -> list[Row]:
    """The signal's rows again by other errors, and the test that nothing is paid, where the headline imposes a null."""
    if fit.second is fit.headline:
        return []
    rows = []
    for at, leg in enumerate(fit.parity.legs):
        if fit.headline.kinds[at] not in AWAY:
            continue
        row = _coefficient(fit, fit.second, (0, at), "second opinion")
        rows.append(row | _of_signal(fit, fit.second, at))
        if leg.role == "return" and leg.weight is not None and fit.has_identity:
            premium, error = leg.weight * row["estimate"], abs(leg.weight) * row["std_error"]
            rows.append(row | {"term": "nothing paid", **judged(fit.second, at, premium, error, 0.0, fit.confidence)})
    return rows


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
        nothing = _coefficient(fit, fit.headline, (0, at), "headline")
        yield nothing | {"term": "nothing paid", **_scaled(found.premium, fit.headline, at, fit.confidence)}
    if fit.leg_of("fundamental") is not None:
        yield _combination(fit, found.expectation) | {"term": "all paid", "note": "null: nothing comes true"}


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
