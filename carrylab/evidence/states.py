"""In which states the spread is paid: shares and R2 by state, whether they are equal, and every spell in turn."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Sequence

import numpy as np

from carrylab.errors import InferenceError, SampleError
from carrylab.evidence.case import Case, Labelled, weighted
from carrylab.evidence.setting import Fit, Row, tested
from carrylab.evidence.shares import share_rows
from carrylab.evidence.stack import fallback_cosines
from carrylab.options import Questions
from carrylab.regression.longrun import longrun
from carrylab.regression.sample import Floats
from carrylab.regression.wald import restrictions, wald

TERMS = ("signal", "nothing paid", "all paid", "resolved premium share")


def state_rows(case: Case, _asked: Questions) -> list[Row]:
    """Rows of sections `states` and `timeline` for every state of the study."""
    return [row for state in case.states for row in (*_of_state(case, state), *_timeline(case.pooled, state))]


def _of_state(case: Case, state: Labelled) -> Iterator[Row]:
    """Shares in each state, what was earned in it, and the test that the premium share is the same in all."""
    fits = []
    for label in dict.fromkeys(text for text in state.labels if text):
        inside = (state.labels == label).astype(np.float64)
        try:
            one = weighted(case.pooled, inside, case.errors, str(label))
        except (SampleError, InferenceError) as refused:
            place = case.pooled.place() | {"section": "states", "sample": label}
            yield place | {"term": "signal", "note": f"too few dates: {refused}"}
            continue
        fits.append(one)
        kept = (row for row in share_rows(one) if row["rank"] == "headline" and row["term"] in TERMS)
        yield from (row | {"section": "states", "rank": ""} for row in kept)
        yield from (one.place() | {"section": "states"} | row for row in _earned(case.pooled, inside, state.note))
    if len(fits) > 1:
        yield (
            case.pooled.place()
            | {"section": "states", "sample": state.name}
            | equal_row(fits, f"equal in all states of {state.name}", state.note)
        )


def _earned(fit: Fit, inside: Floats, note: str) -> Iterator[Row]:
    """Part of the dates and of the summed excess return that belongs to origins in a state, and its mean return."""
    at = fit.leg_of("return")
    rows = fit.sample.mask * inside[:, None]
    yield {"term": "part of observations", "estimate": float(rows.sum() / fit.sample.mask.sum()), "note": note}
    if at is None:
        return
    returns = fit.sample.y[:, :, at]
    yield {"term": "part of summed excess return", "estimate": float((returns * rows).sum() / returns.sum())}
    mean = float((returns * rows).sum() / rows.sum())
    series = ((returns - mean) * rows).sum(axis=1, keepdims=True) / rows.sum()
    run = longrun(series, "cosine", lags=fit.sample.overlap)
    found = tested(mean, math.sqrt(float(run.covariance[0, 0])), 0.0, run.df, fit.confidence)
    yield {"term": "mean excess return", **found, "lags": run.cosines}


def equal_row(fits: Sequence[Fit], term: str, note: str) -> Row:
    """Equal premium shares in samples that do not meet; without a return leg, equal slopes of the first leg."""
    at = fits[0].leg_of("return") or 0
    values = np.array([fit.estimate.coefficients[0, at] for fit in fits])
    series = np.stack([fit.estimate.influence[:, 0, at] for fit in fits], axis=1)
    matrix = np.hstack([np.ones((len(fits) - 1, 1)), -np.eye(len(fits) - 1)])
    names = [f"{fits[0].name} = {fit.name}" for fit in fits[1:]]
    overlap = fits[0].sample.overlap
    place = {"leg": fits[0].parity.legs[at].name, "role": fits[0].parity.legs[at].role, "term": term}
    try:
        cosines = fallback_cosines(series, overlap)
        found = wald(series, values, restrictions(names, matrix), kind="cosine", lags=overlap, cosines=cosines)
    except InferenceError as refused:
        return place | {"note": str(refused)}
    return place | {
        "statistic": found.statistic,
        "df": found.df_denominator,
        "p_value": found.p_value,
        "lags": found.cosines,
        "method": f"{found.law} from {found.cosines} equal-weighted cosines, overlap {overlap}",
        "note": note,
    }


def _timeline(fit: Fit, state: Labelled) -> Iterator[Row]:
    """Every spell: its length, the mean signal at its start, what followed, and the leg that took most of it."""
    for label, start, end in spells(state):
        calendar = fit.parity.calendar
        place = fit.place() | {
            "section": "timeline",
            "sample": f"{label}, {calendar.label(start)} to {calendar.label(end)}",
            "first": calendar.label(start),
            "last": calendar.label(end),
            "n_dates": end - start + 1,
            "n_obs": None,
        }
        here = fit.sample.mask[start]
        place["n_entities"] = int(here.sum())
        if not here.any():
            signal = fit.parity_signal[start]
            known = signal[np.isfinite(signal)]
            yield place | {
                "term": "signal at start",
                "estimate": float(known.mean()) if len(known) else None,
                "note": "what followed is not known",
            }
            continue
        yield place | {"term": "signal at start", "estimate": float(fit.sample.x[start, here, 0].mean())}
        followed = fit.sample.y[start, here].mean(axis=0)
        yield from (place | row for row in _followed(fit, followed))


def _followed(fit: Fit, followed: Floats) -> Iterator[Row]:
    """Each leg over the horizon after the start of a spell, and the one with the largest weighted part."""
    parts = fit.weights * followed
    for leg, value, part in zip(fit.parity.legs, followed, parts, strict=True):
        share = None if math.isnan(part) else float(part)
        yield {"leg": leg.name, "role": leg.role, "term": "what followed", "estimate": float(value), "share": share}
    if fit.has_identity:
        most = fit.parity.legs[int(np.argmax(parts * np.sign(parts.sum())))]
        yield {"term": "taken by", "leg": most.name, "role": most.role, "estimate": float(np.abs(parts).max())}


def spells(state: Labelled) -> Iterator[tuple[str, int, int]]:
    """Label, first and last row of every unbroken spell, the outside of a two-way state left out."""
    for label, rows in itertools.groupby(range(len(state.labels)), key=lambda row: str(state.labels[row])):
        if label and label != f"not {state.name}":
            found = list(rows)
            yield label, found[0], found[-1]
