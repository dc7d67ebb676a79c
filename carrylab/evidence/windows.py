"""Since when: rolling and expanding windows, named periods, one unknown break, and every year left out in turn."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from carrylab.data.calendar import Calendar, Tenor, add, parse_tenor, steps_in
from carrylab.data.dates import bound
from carrylab.errors import InferenceError, SampleError, StudyError
from carrylab.evidence.case import Case, weighted
from carrylab.evidence.setting import Fit, Row, tested
from carrylab.evidence.shares import share_rows
from carrylab.evidence.states import equal_row
from carrylab.options import Period, Questions, Windows
from carrylab.regression.bias import LARGE_BIAS
from carrylab.regression.breaks import Question, sup_wald
from carrylab.regression.fit import fit
from carrylab.regression.sample import Floats
from carrylab.regression.windows import Windows as Estimates
from carrylab.regression.windows import expanding, rolling

TERMS = ("signal", "nothing paid", "all paid", "resolved premium share")
EVERY = parse_tenor("12m")
BREAKS = {"slope": False, "slope and level": True}


def window_rows(case: Case, asked: Questions) -> list[Row]:
    """Rows of sections `windows`, `periods`, `breaks` and `years`, each where it is asked for."""
    rows = list(_windows(case, asked.windows)) if asked.windows else []
    rows += list(_periods(case, asked.periods)) if asked.periods else []
    rows += list(_breaks(case, asked.breaks.trim)) if asked.breaks else []
    return rows + (list(_years(case.pooled)) if asked.years else [])


def _windows(case: Case, asked: Windows) -> Iterator[Row]:
    """Shares with the headline's errors in windows some time apart, and slopes in those that end every period."""
    fit, calendar = case.pooled, case.parity.calendar
    lengths = {"rolling": asked.rolling, "expanding": asked.expanding}
    for scheme, length in lengths.items():
        if length is None:
            continue
        spans = list(_spans(fit, calendar, length, asked.every or EVERY, scheme))
        if not spans:
            raise StudyError(
                f"[evidence], windows, key {scheme}: {str(length)!r} is longer than the sample of market "
                f"{fit.parity.market!r}, {fit.parity.name}, {fit.parity.horizon}, "
                f"{calendar.label(fit.estimate.first)} to {calendar.label(fit.estimate.last)}"
            )
        for start, stop in spans:
            name = f"{f'rolling {length}' if scheme == 'rolling' else scheme} to {calendar.label(stop - 1)}"
            yield from _in(case, _inside(len(calendar), start, stop), name, "windows")
        yield from _every_period(fit, scheme, length)


def _inside(periods: int, start: int, stop: int) -> Floats:
    weights = np.zeros(periods)
    weights[start:stop] = 1.0
    return weights


def _spans(fit: Fit, calendar: Calendar, length: Tenor, every: Tenor, scheme: str) -> Iterator[tuple[int, int]]:
    """Rows [start, stop) of windows back from the newest origin, oldest first."""
    rows, step = _rows_in(fit, calendar, length), max(_rows_in(fit, calendar, every), 1)
    first, stop = fit.estimate.first, fit.estimate.last + 1
    stops = range(stop, first + rows - 1, -step) if rows <= stop - first else range(0)
    for stop in reversed(stops):
        yield (stop - rows if scheme == "rolling" else first, stop)


def _rows_in(fit: Fit, calendar: Calendar, length: Tenor) -> int:
    """Rows of the window of this length that ends with the newest origin; one more than there are where none fits."""
    stop = fit.estimate.last + 1
    start = int(np.searchsorted(add(calendar.days, length), calendar.days[stop - 1], side="right"))
    steps = steps_in(length, calendar.interval)
    return stop - start if steps is None or start else max(steps, stop - start)


def _in(case: Case, weights: Floats, name: str, section: str) -> Iterator[Row]:
    try:
        one = weighted(case.pooled, weights, case.errors, name)
    except (SampleError, InferenceError) as refused:
        place = case.pooled.place() | {"section": section, "sample": name}
        yield place | {"term": "signal", "note": f"too few dates: {refused}"}
        return
    kept = (row for row in share_rows(one) if row["rank"] == "headline" and row["term"] in TERMS)
    yield from (row | {"section": section, "rank": ""} for row in kept)


def _every_period(fit: Fit, scheme: str, length: Tenor) -> Iterator[Row]:
    """The return leg's slope in windows that end every period, with Driscoll-Kraay errors of the overlap."""
    at, calendar = fit.leg_of("return"), fit.parity.calendar
    if at is None or fit.estimate.effects != "entity":
        return
    periods = _rows_in(fit, calendar, length)
    made = rolling if scheme == "rolling" else expanding
    found: Estimates = made(fit.sample, periods, at, lags=fit.sample.overlap)
    leg = fit.parity.legs[at]
    method = f"entity effects; Driscoll-Kraay, Bartlett lag {fit.sample.overlap}, normal; too small under overlap"
    for number in np.flatnonzero(np.isfinite(found.std_error[:, 0])):
        stop = int(found.stop[number]) - 1
        if not fit.estimate.first + periods - 1 <= stop <= fit.estimate.last:
            continue
        slope, error = float(found.slopes[number, 0]), float(found.std_error[number, 0])
        yield fit.place() | {
            "section": "windows",
            "sample": f"{scheme}, every period",
            "leg": leg.name,
            "role": leg.role,
            "term": f"signal, {calendar.label(stop)}",
            **tested(slope, error, 0.0, math.inf, fit.confidence),
            "p_value": None,
            "n_obs": int(found.n_obs[number]),
            "first": calendar.label(int(found.start[number])),
            "last": calendar.label(stop),
            "lags": fit.sample.overlap,
            "method": method,
        }


def _periods(case: Case, periods: tuple[Period, ...]) -> Iterator[Row]:
    """Shares in each named period of origins, and whether the premium share is the same in those that do not meet."""
    fits, used = [], np.zeros(len(case.parity.calendar))
    for period in periods:
        weights = _of_period(case.parity.calendar, period)
        yield from _in(case, weights, period.name, "periods")
        try:
            one = weighted(case.pooled, weights, case.errors, period.name)
        except (SampleError, InferenceError):
            continue
        fits += [one] if not (used * weights).any() else []
        used += weights
    if len(fits) > 1:
        names = ", ".join(one.name for one in fits)
        place = case.pooled.place() | {"section": "periods", "sample": "all"}
        note = "outcomes that start in one period may end in the next" if case.pooled.sample.overlap else ""
        yield place | equal_row(fits, f"equal in {names}", note)


def _of_period(calendar: Calendar, period: Period) -> Floats:
    first, last = bound(period.first, upper=False), bound(period.last, upper=True)
    inside = np.ones(len(calendar))
    if first is not None:
        inside *= calendar.days >= first
    if last is not None:
        inside *= calendar.days <= last
    return inside


def _breaks(case: Case, trim: float) -> Iterator[Row]:
    """Sup-Wald of the return leg's slope, and of slope and level, over all dates inside the trimming."""
    fit = case.pooled
    at = fit.leg_of("return")
    if at is None or fit.estimate.effects in ("time", "both"):
        return
    leg = fit.parity.legs[at]
    place = fit.place() | {"section": "breaks", "leg": leg.name, "role": leg.role}
    for term, level in BREAKS.items():
        try:
            yield place | {"term": term} | _break(fit, at, trim, level=level)
        except SampleError as refused:
            yield place | {"term": term, "note": str(refused)}


def _break(fit: Fit, at: int, trim: float, *, level: bool) -> Row:
    sample, calendar = fit.sample, fit.parity.calendar
    ones = np.ones((*sample.mask.shape, 1))
    entity = fit.estimate.effects == "entity"
    signal, others = sample.x[:, :, :1], sample.x[:, :, 1:]
    # A level that breaks does so for all entities alike; before it breaks it is the constant, or the entity's own.
    breaking = np.concatenate([signal, ones], axis=2) if level else signal
    stable = [others] if entity or level else [others, ones]
    question = Question(
        y=sample.y[:, :, at],
        breaking=breaking,
        stable=np.concatenate(stable, axis=2),
        mask=sample.mask,
        entity=entity,
        lags=sample.overlap,
    )
    found = sup_wald(question, trim=trim)
    note = [f"old regime to {calendar.label(found.at)}, {trim:.0%} trimmed"]
    if found.lower >= 0:
        note.append(
            f"95% interval of the date {calendar.label(found.lower)} to {calendar.label(found.upper)} (Bai 1997)"
        )
    else:
        note.append("no interval of the date: outcomes overlap, or more than one coefficient breaks")
    if fit.errors.bias is not None and (abs(fit.errors.bias.ratio) >= LARGE_BIAS or fit.errors.bias.capped):
        note.append("the signal is persistent, so the law of the statistic holds only roughly")
    return {
        "estimate": float(found.change[0]),
        "statistic": found.statistic,
        "df": float(found.coefficients),
        "p_value": found.p_value,
        "last": calendar.label(found.at),
        "lags": sample.overlap,
        "method": f"sup-Wald (Andrews 1993), date scores, Bartlett lag {sample.overlap}; p after Hansen (1997)",
        "note": "; ".join(note),
    }


def _years(one: Fit) -> Iterator[Row]:
    """The return leg's slope without the origins of each calendar year."""
    at, calendar = one.leg_of("return"), one.parity.calendar
    if at is None:
        return
    leg = one.parity.legs[at]
    years = calendar.days.astype("datetime64[Y]").astype(int) + 1970
    whole = float(one.estimate.coefficients[0, at])
    for year in np.unique(years[one.sample.mask.any(axis=1)]):
        try:
            found = fit(one.sample, effects=one.estimate.effects, weights=(years != year).astype(np.float64))
        except SampleError:
            continue
        slope = float(found.coefficients[0, at])
        yield one.place() | {
            "section": "years",
            "sample": f"without {year}",
            "leg": leg.name,
            "role": leg.role,
            "term": "signal",
            "estimate": slope,
            "r2": float(found.r2[at]),
            "n_obs": found.n_obs,
            "n_dates": found.n_dates,
            "share": None if leg.weight is None else leg.weight * slope,
            "note": f"the year moves the slope by {whole - slope:+.4g}",
        }
