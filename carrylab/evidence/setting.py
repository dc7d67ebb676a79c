"""One fitted regression with its errors and the words that place it in the findings."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from carrylab.errors import InferenceError, SampleError
from carrylab.findings import DOUBTFUL
from carrylab.markets.parity import Parity
from carrylab.regression.bias import VERY_FEW_WINDOWS, Bias, effective_entities, predicted_bias
from carrylab.regression.choice import Choice, Facts, Rank, choose
from carrylab.regression.covariance import FEW_CLUSTERS, ErrorOptions, Errors, standard_errors
from carrylab.regression.fit import Estimate
from carrylab.regression.law import Statistics, statistics
from carrylab.regression.sample import Floats, Sample

Row = dict[str, Any]
# Long-run errors estimated from overlapping outcomes; 1B and the instrument's one-period scores are not.
FROM_OVERLAP = (
    "cosine",
    "instrument, cosine",
    "bartlett",
    "bartlett, fixed-b",
    "rectangular",
    "clustered: both, lagged",
)
AWAY = {"one-period": "cosine", "instrument": "instrument, cosine"}  # errors under the null, and away from it
EFFECTS = {
    "none": "no effects",
    "entity": "entity effects",
    "time": "time effects",
    "both": "entity and time effects",
}


@dataclass(frozen=True, eq=False, slots=True)
class Judged:
    """The errors of one fit.

    `headline` belong to the printed slopes. `test` are those of the test that nothing is paid, with an estimate of
    their own where the automatic choice is the instrument, else the headline's. `away` are valid away from the null
    as well: the headline's, or cosines where it imposes the null of no premium. `second` are those of the second
    opinion. `draws` says what draws under the null are where they are made, `needs_draws` that the automatic choice
    calls for them, `why` why the test was chosen.
    """

    headline: Errors
    test: Errors
    away: Errors
    second: Errors
    bias: Bias | None = None
    draws: Rank = "second opinion"
    why: str = ""
    needs_draws: bool = False


@dataclass(frozen=True, eq=False, slots=True)
class Fit:
    """One group of one parity: sample, estimate and errors.

    `columns` are the entities of the pooled sample that a group takes.
    """

    parity: Parity
    group: str
    sample: Sample
    estimate: Estimate
    errors: Judged
    confidence: float
    name: str = "all"
    columns: tuple[int, ...] = ()

    @property
    def headline(self) -> Errors:
        """The errors of the printed slopes."""
        return self.errors.headline

    @property
    def away(self) -> Errors:
        """Errors that are valid away from the null of no premium."""
        return self.errors.away

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


def errors_of(parity: Parity, sample: Sample, estimate: Estimate, options: ErrorOptions) -> Judged:
    """The errors asked for, those of the test that nothing is paid, those valid away from it, and a second opinion.

    "auto" follows `choose`; a kind that the sample cannot carry gives way to the headline's own. Beside a kind that
    was asked for, the second opinion is the instrument with 1B scores where the kind is 1B, else the errors valid
    away from the null.
    """

    def other(kind: str) -> Errors:
        return standard_errors(sample, estimate, replace(options, kind=kind, factor=None, reference=None))

    headline = standard_errors(sample, estimate, options)
    kind = next((AWAY[kind] for kind in headline.kinds if kind in AWAY), None)
    away = headline if kind is None else other(kind)
    at = next((at for at, leg in enumerate(parity.legs) if leg.role == "return"), None)
    bias = None if at is None else predicted_bias(sample, estimate, at, float(headline.std_error[0, at]))
    if options.kind == "auto" and bias is not None and at is not None:
        facts = _facts(parity, sample, estimate, headline.kinds[at] == "one-period", bias.ratio)
        return _chosen(Judged(headline, headline, away, away, bias), choose(facts), other)
    second = _carried(other, "instrument", away) if "one-period" in headline.kinds else away
    return Judged(headline, headline, away, second, bias)


def _facts(parity: Parity, sample: Sample, estimate: Estimate, one_period: bool, ratio: float) -> Facts:
    return Facts(
        entities=estimate.n_entities,
        ratio=ratio,
        windows=windows_of(sample, estimate),
        one_period=one_period,
        curves=len({entity.economy for entity in parity.entities if entity.maturity}),
    )


def windows_of(sample: Sample, estimate: Estimate) -> float:
    """How many windows that do not overlap the used dates would fill, K = T/h."""
    return estimate.n_dates / (sample.overlap + 1)


def _chosen(judged: Judged, choice: Choice, other: Callable[[str], Errors]) -> Judged:
    """The errors of an automatic choice; where the instrument cannot be had, least squares stands and is said."""
    own = {"one-period": judged.headline, "cosine": judged.away}
    test = own.get(choice.test) or _carried(other, choice.test, judged.headline)
    second = own.get(choice.second) or _carried(other, choice.second, judged.away)
    why = choice.why
    if test is judged.headline and choice.test == "instrument":
        why += ", and the instrument cannot be had on this sample"
    return replace(judged, test=test, second=second, draws=choice.draws, why=why, needs_draws=choice.needed)


def _carried(other: Callable[[str], Errors], kind: str, otherwise: Errors) -> Errors:
    """Errors of a kind, or others where the sample cannot carry it."""
    try:
        return other(kind)
    except (InferenceError, SampleError):
        return otherwise


def doubt(one: Fit, errors: Errors, leg: int) -> str:
    """Why the p-value of one leg may not be relied on, or nothing: few windows for a long-run error, few clusters."""
    kind, windows = errors.kinds[leg], windows_of(one.sample, one.estimate)
    if kind in FROM_OVERLAP and one.sample.overlap and windows < VERY_FEW_WINDOWS:
        return f"{DOUBTFUL}{windows:.1f} independent windows are too few for errors from the outcomes' own overlap"
    if kind == "clustered: entity":
        together = effective_entities(one.sample, one.estimate, leg)
        if one.estimate.n_entities < FEW_CLUSTERS or together < one.estimate.n_entities / 2:
            return (
                f"{DOUBTFUL}clustered by {one.estimate.n_entities} entities that share their shocks "
                f"(as good as {together:.1f} on their own)"
            )
    return ""


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
