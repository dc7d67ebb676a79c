"""At which horizons the spread is paid: every horizon with its own band, one band for all, and the null's own."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace

import numpy as np

from carrylab.data.calendar import Interval, Tenor, parse_tenor, steps_in
from carrylab.errors import InferenceError, SampleError
from carrylab.evidence.case import Case, weighted
from carrylab.evidence.setting import Fit, Row, tested
from carrylab.evidence.shares import share_rows
from carrylab.evidence.stack import fallback_cosines
from carrylab.options import Profile, Questions
from carrylab.regression.cumulated import cumulated
from carrylab.regression.longrun import cosine_count
from carrylab.regression.sample import Floats
from carrylab.regression.uniform import sup_t
from carrylab.regression.wald import restrictions, wald

STEP: dict[Interval, str] = {"day": "1d", "week": "1w", "month": "1m", "quarter": "3m", "year": "12m"}
DISTANT = ("forward-spot-far", "yield-spread-to-maturity")  # whose horizon is set by the maturity
TERMS = ("signal", "nothing paid", "all paid", "resolved premium share", "sum of shares")
CHANCE = ("slope by chance", "R2 by chance", "nothing paid", "stepdown")
COMMON, ROLLED = "common origins", "rolled over"
SEED = 7


def horizon_rows(cases: Sequence[Case], asked: Questions) -> list[Row]:
    """Rows of section `horizons` for every parity, once whatever horizons the study has."""
    if asked.horizons is None:
        return []
    first = {(case.parity.market, case.parity.name): case for case in reversed(cases)}
    chosen = [case for case in first.values() if case.parity.name not in DISTANT]
    return [row for case in reversed(chosen) for row in _profile(case, asked.horizons)]


def candidates(parity: str, interval: Interval, profile: Profile) -> list[Tenor]:
    """Multiples of the step up to the longest horizon; whole years for the dividend-price parity."""
    step = profile.every or parse_tenor(STEP[interval])
    found, horizon = [], step
    while horizon <= profile.until:
        if parity != "dividend-price" or not (horizon.days or horizon.months % 12):
            found.append(horizon)
        horizon = horizon + step
    return found


def _profile(case: Case, profile: Profile) -> Iterator[Row]:
    horizons = candidates(case.parity.name, case.parity.calendar.interval, profile)
    again = case.at_horizons(horizons)
    place = {name: case.pooled.place()[name] for name in ("market", "parity", "interval")}
    place |= {"section": "horizons", "group": "pooled", "sample": "all"}
    for horizon, why in again.refused:
        yield place | {"horizon": str(horizon), "term": "not built", "note": why}
    fits = [one.pooled for one in again.cases]
    if not fits:
        return
    yield from _of_fits(fits)
    if len(fits) > 1:
        yield place | {"horizon": str(fits[-1].parity.horizon)} | _joint(fits)
        yield from _chance(case, fits)
    yield from (place | row for row in _half(fits))
    yield from _rolled(case, profile)
    if profile.common_sample and len(fits) > 1:
        yield from _of_fits(list(_on_common_origins(again.cases)))


def _rolled(case: Case, profile: Profile) -> Iterator[Row]:
    """One-period excess returns rolled over, cumulated to every horizon on today's signal; needs no quotes."""
    fit = case.pooled
    at = fit.leg_of("return")
    outcome = None if at is None else fit.sample.one_step[at]
    if at is None or outcome is None or outcome.outcomes.ndim == 3 or (outcome.weights != 1).any():
        return
    if fit.estimate.effects != "entity" or len(fit.sample.terms) > 1 or case.parity.calendar.interval == "day":
        return
    horizons = candidates("", case.parity.calendar.interval, profile)
    steps = [steps_in(horizon, case.parity.calendar.interval) for horizon in horizons]
    whole = [(horizon, step) for horizon, step in zip(horizons, steps, strict=True) if step is not None]
    try:
        found = cumulated(fit.parity_signal, outcome.outcomes, [step for _, step in whole])
    except SampleError as refused:
        yield replace(fit, name=ROLLED).place() | {"section": "horizons", "term": "not built", "note": str(refused)}
        return
    leg = case.parity.legs[at]
    place = replace(fit, name=ROLLED).place() | {"section": "horizons", "leg": leg.name, "role": leg.role}
    method = "entity effects; Hodrick 1B, one-period outcomes rolled over, valid at the null of no premium; normal"
    for number, (horizon, _) in enumerate(whole):
        slope, error = float(found.slopes[number]), float(found.one_period[number])
        yield place | {
            "horizon": str(horizon),
            "term": "signal",
            **tested(slope, error, 0.0, math.inf, fit.confidence),
            "r2": float(found.r2[number]),
            "n_obs": int(found.n_obs[number]),
            "n_dates": int(found.n_dates[number]),
            "method": method,
        }


def _on_common_origins(cases: Sequence[Case]) -> Iterator[Fit]:
    """The same fits on the origins of the longest horizon alone."""
    longest = np.asarray(cases[-1].pooled.sample.mask.any(axis=1), dtype=np.float64)
    for one in cases:
        try:
            yield weighted(one.pooled, longest, one.errors, COMMON)
        except (SampleError, InferenceError):
            continue


def _of_fits(fits: Sequence[Fit]) -> Iterator[Row]:
    """Shares at each horizon, and the band around each leg that holds at all of them at once."""
    for fit in fits:
        kept = (row for row in share_rows(fit) if row["rank"] == "headline" and row["term"] in TERMS)
        yield from (row | {"section": "horizons", "rank": ""} for row in kept)
    if len(fits) > 1:
        for role in ("return", "fundamental"):
            yield from _bands(fits, role)


def _bands(fits: Sequence[Fit], role: str) -> Iterator[Row]:
    """Estimate plus and minus the sup-t critical value times the larger of the errors at and away from the null."""
    legs = [fit.leg_of(role) for fit in fits]
    if any(leg is None for leg in legs):
        return
    placed = [(fit, leg) for fit, leg in zip(fits, legs, strict=True) if leg is not None]
    series = stacked([(fit, leg) for fit, leg in placed])
    df = min(float(fit.away.df[leg]) for fit, leg in placed)
    overlap = max(fit.sample.overlap for fit in fits)
    count = cosine_count(int((series != 0).any(axis=1).sum()), overlap)
    critical = sup_t(series, df, confidence=fits[0].confidence, cosines=count, seed=SEED)
    for fit, leg in placed:
        value = float(fit.away.estimate.coefficients[0, leg])
        reach = critical * max(float(errors.std_error[0, leg]) for errors in (fit.away, fit.headline))
        yield fit.place() | {
            "section": "horizons",
            "leg": fit.parity.legs[leg].name,
            "role": role,
            "term": "signal, all horizons at once",
            "estimate": value,
            "lower": value - reach,
            "upper": value + reach,
            "statistic": critical,
            "df": df,
            "method": f"uniform band: {critical:.2f} standard errors, the larger of those at and away from the null",
            "note": "sup-t (Montiel Olea and Plagborg-Moller 2019)",
        }


def stacked(placed: Sequence[tuple[Fit, int]]) -> Floats:
    """Influence series (T, m) of the signal's slopes on the calendar all of them share."""
    numbers = np.unique(np.concatenate([fit.parity.calendar.ordinals for fit, _ in placed]))
    series = np.zeros((len(numbers), len(placed)))
    for column, (fit, leg) in enumerate(placed):
        rows = np.searchsorted(numbers, fit.parity.calendar.ordinals)
        series[rows, column] = fit.estimate.influence[:, 0, leg]
    return series


def _joint(fits: Sequence[Fit]) -> Row:
    """Nothing paid at a few horizons evenly spread, as many as the cosines can carry; draws test all of them."""
    placed = [(fit, fit.leg_of("return") or 0) for fit in fits]
    overlap = max(fit.sample.overlap for fit in fits)
    whole = stacked(placed)
    cosines = fallback_cosines(whole, overlap)
    count = max(2, min(len(fits), cosines // 2))
    chosen = sorted(set(np.linspace(0, len(fits) - 1, count).round().astype(int).tolist()))
    names = [str(fits[at].parity.horizon) for at in chosen]
    values = np.array([placed[at][0].estimate.coefficients[0, placed[at][1]] for at in chosen])
    row = {"term": "nothing paid at any horizon", "method": f"cosines and F over {', '.join(names)}"}
    try:
        tests = restrictions(names, np.eye(len(chosen)))
        found = wald(whole[:, chosen], values, tests, kind="cosine", lags=overlap, cosines=cosines)
    except InferenceError as refused:
        return row | {"note": str(refused)}
    return row | {
        "statistic": found.statistic,
        "df": found.df_denominator,
        "p_value": found.p_value,
        "lags": found.cosines,
        "method": f"{found.law} from {found.cosines} cosines over {', '.join(names)}, overlap {overlap}",
    }


def _chance(case: Case, fits: Sequence[Fit]) -> Iterator[Row]:
    """What the null itself gives at each horizon, all horizons from the same draws; one p for all of them."""
    drawn = case.draw([(fit,) for fit in fits])
    kept = [row for row in drawn.rows if row["section"] == "draws" and row["term"] in CHANCE]
    words = {"nothing paid": "nothing paid, by draws", "stepdown": "nothing paid, stepped down"}
    for row in kept:
        yield row | {"section": "horizons", "term": words.get(row["term"], row["term"])}
    adjusted = [row["p_value"] for row in kept if row["term"] == "stepdown"]
    place = fits[-1].place() | {"section": "horizons", "term": "nothing paid at any horizon, by draws"}
    if adjusted:
        yield place | {"p_value": min(adjusted), "method": kept[0]["method"], "note": "the rarest horizon against all"}
    else:
        yield place | {"note": drawn.refused or "no draws were asked for"}


def _half(fits: Sequence[Fit]) -> Iterator[Row]:
    """The first horizon at which more than half of the spread comes true, or the largest share up to the longest."""
    shares = [
        (fit, sum(float(row["share"]) for row in share_rows(fit) if _is_fundamental(row)))
        for fit in fits
        if fit.has_identity
    ]
    if not shares:
        return
    term = "expectation share passes one half"
    passed = next(((fit, share) for fit, share in shares if share > 0.5), None)
    if passed:
        yield {"horizon": str(passed[0].parity.horizon), "term": term, "estimate": passed[1]}
        return
    most, share = max(shares, key=lambda pair: pair[1])
    note = f"never up to {fits[-1].parity.horizon}; largest at {most.parity.horizon}"
    yield {"horizon": str(most.parity.horizon), "term": term, "estimate": share, "note": note}


def _is_fundamental(row: Row) -> bool:
    return bool(row["rank"] == "headline" and row["term"] == "signal" and row["role"] == "fundamental")
