"""One fitted regression with its errors and the words that place it in the findings."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from carrylab.errors import InferenceError
from carrylab.markets.parity import Parity
from carrylab.regression.covariance import ErrorOptions, Errors, standard_errors
from carrylab.regression.fit import Estimate
from carrylab.regression.law import Statistics, statistics
from carrylab.regression.sample import Floats, Sample

Row = dict[str, Any]
AWAY = {"one-period": "cosine", "instrument": "instrument, cosine"}  # errors under the null, and away from it
EFFECTS = {
    "none": "no effects",
    "entity": "entity effects",
    "time": "time effects",
    "both": "entity and time effects",
}


@dataclass(frozen=True, eq=False, slots=True)
class Fit:
    """One group of one parity: sample, estimate and errors.

    `headline` are the errors the study chose. `away` are valid away from the null as well: equal to the headline,
    or cosines where the headline imposes the null of no premium. Both rest on the estimate of the headline, which is
    the instrument's own where the study chose it. `second` are those of the second opinion, with an estimate of their
    own. `columns` are the entities of the pooled sample that a group takes.
    """

    parity: Parity
    group: str
    sample: Sample
    estimate: Estimate
    headline: Errors
    away: Errors
    second: Errors
    confidence: float
    name: str = "all"
    columns: tuple[int, ...] = ()

    @property
    def parity_signal(self) -> Floats:
        """The signal of this fit's entities on all dates (T, n), with its holes."""
        return self.parity.signal[:, list(self.columns)] if self.columns else self.parity.signal

    @property
    def weights(self) -> Floats:
        """Weights of the legs (L,), NaN where a leg has none."""
        return np.array([np.nan if leg.weight is None else leg.weight for leg in self.parity.legs])

    @property
    def has_identity(self) -> bool:
        """Every leg has a weight, so shares exist."""
        return not np.isnan(self.weights).any()

    def leg_of(self, role: str) -> int | None:
        """Number of the first leg with this role, or None."""
        roles = [leg.role for leg in self.parity.legs]
        return roles.index(role) if role in roles else None

    def method(self, errors: Errors, leg: int) -> str:
        """Effects and errors of one leg in words."""
        return f"{EFFECTS[self.estimate.effects]}; {errors.words[leg]}"

    def place(self) -> Row:
        """The columns that say where a row belongs and what it rests on."""
        parity, estimate = self.parity, self.estimate
        return {
            "market": parity.market,
            "parity": parity.name,
            "horizon": str(parity.horizon),
            "interval": parity.calendar.interval,
            "group": self.group,
            "sample": self.name,
            "n_dates": estimate.n_dates,
            "n_entities": estimate.n_entities,
            "n_obs": estimate.n_obs,
            "first": parity.calendar.label(estimate.first),
            "last": parity.calendar.label(estimate.last),
        }


def errors_of(sample: Sample, estimate: Estimate, options: ErrorOptions) -> tuple[Errors, Errors, Errors]:
    """The errors asked for, those that hold away from the null of no premium too, and those of a second opinion.

    Beside 1B the second opinion is the instrument with 1B scores, whose size holds for persistent signals too; where
    the sample cannot carry it, and beside the instrument itself, it is the errors valid away from the null.
    """
    headline = standard_errors(sample, estimate, options)
    away = next((AWAY[kind] for kind in headline.kinds if kind in AWAY), None)
    if away is None:
        return headline, headline, headline

    def other(kind: str) -> Errors:
        return standard_errors(sample, estimate, replace(options, kind=kind, factor=None, reference=None))

    beside = other(away)
    if "one-period" not in headline.kinds:
        return headline, beside, beside
    try:
        return headline, beside, other("instrument")
    except InferenceError:
        return headline, beside, beside


def tested(value: float, error: float, null: float, df: float, confidence: float) -> Row:
    """The columns of an estimate with its error, test and interval by Student's t or the normal."""
    return _columns(value, error, null, df, statistics(value, error, null, df, confidence))


def judged(errors: Errors, leg: int, value: float, error: float, null: float, confidence: float) -> Row:
    """The columns of an estimate with its error, test and interval by the law of one leg's errors."""
    df, bandwidth = float(errors.df[leg]), float(errors.bandwidth[leg])
    return _columns(value, error, null, df, statistics(value, error, null, df, confidence, bandwidth))


def _columns(value: float, error: float, null: float, df: float, found: Statistics) -> Row:
    return {
        "estimate": value,
        "std_error": error,
        "statistic": float(found.statistic),
        "df": df,
        "p_value": float(found.p_value),
        "lower": float(found.lower),
        "upper": float(found.upper),
        "null": null,
    }
