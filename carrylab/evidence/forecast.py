"""Would it have worked: forecasts made with what was known, against the mean and against the parity's own forecast."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from carrylab.data.calendar import Calendar, Tenor, add, horizon_years
from carrylab.errors import InferenceError, SampleError, StudyError
from carrylab.evidence.case import Case
from carrylab.evidence.setting import Fit, Row
from carrylab.markets.parity import Leg
from carrylab.options import Forecast, Questions
from carrylab.regression.accuracy import (
    OneSided,
    by_date,
    certainty_equivalent,
    clark_west,
    encompassing,
    held,
    r2_out_of_sample,
)
from carrylab.regression.forecast import Forecasts, forecasts, training
from carrylab.regression.sample import Floats

CAP = 1.5  # of the weight a mean-variance investor may hold, long or short
MEAN, PARITY, SIGNED = "historical mean", "parity's own forecast", "historical mean, sign restricted"
SCHEMES = ("recursive", "rolling")


@dataclass(frozen=True, eq=False, slots=True)
class Contest:
    """Outcomes of one leg and their forecasts, (T, N) each with holes: the model, the mean and the parity's own.

    `slope` (T,) of the signal at each origin, `variance` (T, N) of the outcomes that trained it.
    """

    leg: Leg
    actual: Floats
    model: Floats
    mean: Floats
    parity: Floats | None
    variance: Floats
    slope: Floats


def forecast_rows(case: Case, asked: Questions) -> list[Row]:
    """Rows of section `forecast`: recursive forecasts, and rolling ones where the study asks for them."""
    if asked.forecast is None:
        return []
    fit = case.pooled
    if fit.estimate.effects in ("time", "both"):
        note = "time effects of a date are not known before it; forecasts need effects none or entity"
        return [fit.place() | {"section": "forecast", "term": "not made", "note": note}]
    lengths = dict(zip(SCHEMES, (None, asked.forecast.rolling), strict=True))
    chosen = [name for name in SCHEMES if name == "recursive" or lengths[name] is not None]
    return [row for name in chosen for row in _of_scheme(case, asked.forecast, name, lengths[name])]


def _of_scheme(case: Case, asked: Forecast, scheme: str, length: Tenor | None) -> Iterator[Row]:
    fit = case.pooled
    place = fit.place() | {"section": "forecast", "sample": scheme}
    try:
        found = _forecast(case, asked.first, length)
    except SampleError as refused:
        yield place | {"term": "not made", "note": str(refused)}
        return
    for at, leg in enumerate(fit.parity.legs):
        if leg.role in ("return", "fundamental"):
            contest = _contest(fit, found, at)
            known = {"leg": leg.name, "role": leg.role, **_extent(fit, contest)}
            yield from (place | known | row for row in _of_leg(fit, contest, asked))


def first_origin(calendar: Calendar, start: int, first: Tenor) -> int:
    """Row of the first origin to be forecast: `first` after the first row that the sample uses."""
    begin = add(calendar.days[[start]], first)[0]
    return int(np.searchsorted(calendar.days, begin))


def _forecast(case: Case, first: Tenor, length: Tenor | None) -> Forecasts:
    fit, calendar = case.pooled, case.parity.calendar
    origin = first_origin(calendar, fit.estimate.first, first)
    if origin >= fit.estimate.last:
        raise StudyError(
            f"[evidence], forecast, key first: {str(first)!r} leaves no origin of market {fit.parity.market!r}, "
            f"{fit.parity.name}, {fit.parity.horizon} to forecast; its sample runs from "
            f"{calendar.label(fit.estimate.first)} to {calendar.label(fit.estimate.last)}"
        )
    least = max(2, int(fit.sample.mask[: origin + 1].any(axis=1).sum()) // 2)
    start = None if length is None else np.maximum(_before(calendar, case.parity.window.ends, length), 0)
    train = training(case.parity.window.ends, origin, start=start, least=least)
    return forecasts(fit.sample, case.terms, train, entity=fit.estimate.effects == "entity")


def _before(calendar: Calendar, ends: np.ndarray, length: Tenor) -> np.ndarray:
    """First row of the rolling window that ends with the newest outcome known at each origin."""
    known = np.where(ends >= 0, ends, len(ends))
    newest = np.searchsorted(np.maximum.accumulate(known), np.arange(len(ends)), side="right") - 1
    starts = np.searchsorted(add(calendar.days, length), calendar.days[np.maximum(newest, 0)], side="right")
    return starts.astype(np.int64)


def _contest(fit: Fit, found: Forecasts, at: int) -> Contest:
    leg = fit.parity.legs[at]
    actual = np.where(fit.sample.mask, fit.sample.y[:, :, at], np.nan)
    model = np.where(fit.sample.mask, found.model[:, :, at], np.nan)
    stands = np.isfinite(actual + model)
    parity = None if leg.null is None else np.where(stands, leg.null * fit.sample.x[:, :, 0], np.nan)
    mean, variance = (np.where(stands, part[:, :, at], np.nan) for part in (found.mean, found.variance))
    return Contest(leg, np.where(stands, actual, np.nan), model, mean, parity, variance, found.slopes[:, 0, at])


def _extent(fit: Fit, contest: Contest) -> Row:
    stands = np.isfinite(contest.actual)
    rows = np.flatnonzero(stands.any(axis=1))
    label = fit.parity.calendar.label
    return {
        "n_obs": int(stands.sum()),
        "n_dates": len(rows),
        "n_entities": int(stands.any(axis=0).sum()),
        "first": label(int(rows[0])) if len(rows) else "",
        "last": label(int(rows[-1])) if len(rows) else "",
    }


def _of_leg(fit: Fit, contest: Contest, asked: Forecast) -> Iterator[Row]:
    if not np.isfinite(contest.actual).any():
        yield {"term": "not made", "note": "no forecast meets an outcome; start earlier"}
        return
    yield from _against(fit, contest, contest.model, contest.mean, MEAN)
    if contest.parity is not None:
        yield from _against(fit, contest, contest.model, contest.parity, PARITY)
    if contest.leg.role != "return":
        return
    signed = restricted(contest)
    yield {"term": f"R2 against the {SIGNED}", "estimate": r2_out_of_sample(contest.actual, signed, contest.mean)}
    yield from _by_entity(fit, contest)
    yield from _gain(fit, contest, asked.risk_aversion)
    yield from _running(fit, contest)


def restricted(contest: Contest) -> Floats:
    """Forecasts of a premium that may not fall with the signal, nor below zero.

    Where the slope is negative the forecast is the mean, and no forecast is below zero (Campbell and Thompson 2008).
    """
    right = np.where((contest.slope >= 0)[:, None], contest.model, contest.mean)
    signed: Floats = np.where(np.isfinite(contest.model), np.maximum(right, 0.0), np.nan)
    return signed


def _against(fit: Fit, contest: Contest, model: Floats, benchmark: Floats, name: str) -> Iterator[Row]:
    """R2, Clark-West and encompassing against one benchmark."""
    yield {"term": f"R2 against the {name}", "estimate": r2_out_of_sample(contest.actual, model, benchmark)}
    tests: dict[str, Callable[[Floats, Floats, Floats, int], OneSided]] = {
        "Clark-West": clark_west,
        "encompassing": encompassing,
    }
    for term, test in tests.items():
        row: Row = {"term": f"{term} against the {name}"}
        try:
            found = test(contest.actual, model, benchmark, fit.sample.overlap)
        except InferenceError as refused:
            yield row | {"note": str(refused)}
            continue
        yield row | {
            "estimate": found.value,
            "std_error": found.std_error,
            "statistic": found.statistic,
            "df": found.df,
            "p_value": found.p_value,
            "null": 0.0,
            "lags": int(found.df),
            "method": f"one-sided, equal-weighted cosines, {found.df:.0f} cosines",
        }


def _by_entity(fit: Fit, contest: Contest) -> Iterator[Row]:
    """R2 against the mean for each entity of a panel."""
    stands = np.isfinite(contest.actual).sum(axis=0)
    if (stands > 0).sum() < 2:
        return
    for i, entity in enumerate(fit.parity.entities):
        if stands[i] > 1:
            own = (contest.actual[:, i], contest.model[:, i], contest.mean[:, i])
            yield {
                "group": entity.name,
                "term": f"R2 against the {MEAN}",
                "estimate": r2_out_of_sample(*own),
                "n_obs": int(stands[i]),
                "n_entities": 1,
            }


def _gain(fit: Fit, contest: Contest, risk_aversion: float) -> Iterator[Row]:
    """Certainty equivalent a year of holding by the model, by the mean, and the difference; entities alike."""
    years = horizon_years(fit.parity.horizon, fit.parity.calendar.interval)
    note = (
        f"decimal a year, mean-variance investor of risk aversion {risk_aversion:g} in each entity, weights within "
        f"{CAP:g} long or short, equal parts in all; before costs, and outcomes overlap"
    )
    found = {}
    for name, forecast in (("the model", contest.model), ("the historical mean", contest.mean)):
        weights = held(forecast, contest.variance, risk_aversion, CAP)
        found[name] = certainty_equivalent(by_date(weights * contest.actual), risk_aversion, years)
        yield {"term": f"certainty equivalent by {name}", "estimate": found[name], "note": note}
    gain = found["the model"] - found["the historical mean"]
    yield {"term": "gain in certainty equivalent", "estimate": gain, "note": note}


def _running(fit: Fit, contest: Contest) -> Iterator[Row]:
    """Sum to date of the mean's squared errors less the model's, mean over entities, at each origin."""
    gained = by_date((contest.actual - contest.mean) ** 2 - (contest.actual - contest.model) ** 2)
    total = np.cumsum(np.nan_to_num(gained))
    for row in np.flatnonzero(np.isfinite(gained)):
        label = fit.parity.calendar.label(int(row))
        yield {"term": f"running difference, {label}", "estimate": float(total[row]), "last": label}
