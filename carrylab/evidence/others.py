"""The return leg's slope by other published methods, beside the headline: what a referee asks to see."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator

import numpy as np

from carrylab.errors import InferenceError, SampleError
from carrylab.evidence.setting import Fit, Row, judged, tested
from carrylab.regression.amihud_hurvich import amihud_hurvich
from carrylab.regression.ivx import ivx
from carrylab.regression.jackknife import half_panel, half_panel_null
from carrylab.regression.reverse import reverse_interval
from carrylab.regression.sample import OneStep

Method = Callable[[Fit, int, OneStep], Row]


def other_rows(fit: Fit) -> list[Row]:
    """Rows of section `other methods`; none without one-period outcomes, or with time effects."""
    at = fit.leg_of("return")
    outcome = None if at is None else fit.sample.one_step[at]
    if at is None or outcome is None or fit.estimate.effects not in ("none", "entity"):
        return []
    leg = fit.parity.legs[at]
    place = fit.place() | {"section": "other methods", "leg": leg.name, "role": leg.role}
    return [place | row for row in (*_instrument(fit, at), *_rows(fit, at, outcome))]


def _instrument(fit: Fit, at: int) -> list[Row]:
    """The slope by the instrument where it is the test or the second opinion."""
    for errors in (fit.errors.test, fit.errors.second):
        if errors.kinds[at] == "instrument":
            value, error = float(errors.estimate.coefficients[0, at]), float(errors.std_error[0, at])
            return [{"term": "IVX instrument", **judged(errors, at, value, error, 0.0, fit.confidence)}]
    return []


def _rows(fit: Fit, at: int, outcome: OneStep) -> Iterator[Row]:
    chosen: dict[str, Method] = {"half-panel jackknife": _jackknife}
    if outcome.outcomes.ndim == 2 and len(fit.sample.terms) == 1:
        chosen["reverse regression"] = _reverse
        if fit.estimate.n_entities == 1 and (outcome.weights == 1).all():
            chosen["IVX, one period ahead"] = _ivx
            if not fit.sample.overlap:
                chosen["Amihud-Hurvich"] = _amihud_hurvich
    for term, method in chosen.items():
        try:
            yield {"term": term, **method(fit, at, outcome)}
        except (InferenceError, SampleError) as refused:
            yield {"term": term, "note": str(refused)}


def _jackknife(fit: Fit, at: int, _outcome: OneStep) -> Row:
    found = half_panel(fit.sample, fit.estimate)
    series = half_panel_null(fit.sample, found, at).series[:, 0]
    error = math.sqrt(float(series @ series))
    words = "halves of each entity's dates (Dhaene and Jochmans 2015) with one-period scores, our own; normal"
    return tested(float(found.coefficients[0, at]), error, 0.0, math.inf, fit.confidence) | {"method": words}


def _reverse(fit: Fit, _at: int, outcome: OneStep) -> Row:
    found = reverse_interval(fit.parity_signal, outcome.outcomes, outcome.weights, fit.confidence)
    words = "one-period outcome on the summed signal (Hodrick 1992), variance ratio taken as known; normal"
    return tested(found.slope, found.std_error, 0.0, math.inf, fit.confidence) | {"n_obs": found.n_obs, "method": words}


def _ivx(fit: Fit, _at: int, outcome: OneStep) -> Row:
    signal, one = fit.parity_signal[:, 0], outcome.outcomes[:, 0]
    stands = np.flatnonzero(np.isfinite(signal))
    rows = slice(int(stands[0]), int(stands[-1]) + 1)
    found = ivx(signal[rows, None], one[rows], horizon=len(outcome.weights))
    error = math.sqrt(float(found.covariance[0, 0]))
    words = "slope one period ahead; Kostakis, Magdalinos and Stamatogiannis (2015), homoskedastic; normal"
    return tested(float(found.slopes[0]), error, 0.0, math.inf, fit.confidence) | {"method": words}


def _amihud_hurvich(fit: Fit, _at: int, outcome: OneStep) -> Row:
    found = amihud_hurvich(fit.parity_signal[:, 0], outcome.outcomes[:, 0])
    words = "Amihud and Hurvich (2004); normal"
    row = tested(found.slope, found.std_error, 0.0, math.inf, fit.confidence) | {"n_obs": found.n, "method": words}
    return row | {"note": "persistence sits at its cap"} if found.capped else row
