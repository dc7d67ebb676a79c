"""What stands beside every slope: means, the level share, effective entities, windows, and what the test is worth."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from carrylab.evidence.cautions import cautions
from carrylab.evidence.setting import Fit, Row, tested, windows_of
from carrylab.regression.bias import Bias, effective_entities
from carrylab.regression.law import critical
from carrylab.regression.longrun import longrun
from carrylab.regression.ratio import ratio_interval
from carrylab.regression.sample import Floats

CLEAR = 2.0  # the mean signal counts as away from zero beyond this many standard errors


def summary_rows(fit: Fit, said: Sequence[str] = ()) -> list[Row]:
    """Every row of section `summary` for one fit, and its warnings after those already `said`."""
    place = fit.place()
    rows = [*_levels(fit), *_dispersion(fit)]
    at = fit.leg_of("return")
    warnings = list(dict.fromkeys([*said, *fit.headline.warnings, *cautions(fit)]))
    if at is not None and fit.errors.bias is not None:
        rows += _worth(fit, at, fit.errors.bias)
    return [place | {"section": "summary"} | row for row in rows] + [
        place | {"section": "warning", "term": f"warning {number}", "note": text}
        for number, text in enumerate(warnings, 1)
    ]


def _levels(fit: Fit) -> list[Row]:
    """Mean signal, mean excess return and their ratio, each with an error robust to overlap."""
    at = fit.leg_of("return")
    columns = [fit.sample.x[:, :, 0]] + ([] if at is None else [fit.sample.y[:, :, at]])
    means, series = _means(fit, columns)
    run = longrun(series, "cosine", lags=fit.sample.overlap)
    errors = np.sqrt(np.diag(run.covariance))
    method = f"mean over all rows, equal-weighted cosines, {run.cosines} cosines"
    names = ("mean signal", "mean excess return")
    rows: list[Row] = [
        {"term": name, **tested(mean, error, 0.0, run.df, fit.confidence), "lags": run.cosines, "method": method}
        for name, mean, error in zip(names, means, errors, strict=False)
    ]
    rows[0]["leg"] = fit.parity.signal_name
    if at is None or not fit.has_identity:
        return rows
    return [*rows, _level_share(means, run.covariance, run.df, fit.confidence)]


def _means(fit: Fit, columns: list[Floats]) -> tuple[list[float], Floats]:
    mask, total = fit.sample.mask, fit.estimate.n_obs
    means = [float(column.sum()) / total for column in columns]
    series = [((column - mean) * mask).sum(axis=1) / total for column, mean in zip(columns, means, strict=True)]
    return means, np.stack(series, axis=1)


def _level_share(means: list[float], covariance: Floats, df: float, confidence: float) -> Row:
    signal, premium = means
    if abs(signal) < CLEAR * math.sqrt(covariance[0, 0]):
        return {"term": "level share", "note": "the mean signal is not away from zero, so its ratio says nothing"}
    swapped = covariance[::-1, ::-1]
    interval = ratio_interval(premium, signal, swapped, float(critical(confidence, df)))
    return {
        "term": "level share",
        "estimate": premium / signal,
        "lower": interval.lower,
        "upper": interval.upper,
        "note": "mean excess return over mean signal; interval by inverting the linear restriction",
    }


def _dispersion(fit: Fit) -> list[Row]:
    """Spread of the signal before and after the effects, and the number of windows that do not overlap."""
    mask, n = fit.sample.mask, fit.estimate.n_obs
    signal = fit.sample.x[:, :, 0][mask]
    k = len(fit.sample.terms)
    centre = fit.estimate.absorbed.entity[:, 0] + fit.estimate.absorbed.date[:, :1]
    within = ((fit.sample.x[:, :, 0] - centre) * mask).ravel()
    return [
        {"term": "signal sd", "estimate": float(signal.std(ddof=1))},
        {"term": "signal sd within", "estimate": math.sqrt(float(within @ within) / max(n - k, 1))},
        {"term": "independent windows", "estimate": windows_of(fit.sample, fit.estimate)},
    ]


def _worth(fit: Fit, at: int, bias: Bias) -> list[Row]:
    """How far the return leg's nominal 5% test can be trusted."""
    note = "plug-in for the error of the headline (Stambaugh 1999), pooled and h-step forms our own"
    return [
        {"term": "effective entities", "estimate": effective_entities(fit.sample, fit.estimate, at)},
        {"term": "persistence", "estimate": bias.persistence, "note": "per period, bias-corrected"},
        {"term": "bias ratio", "estimate": bias.ratio, "note": note},
        {"term": "predicted size", "estimate": bias.size, "note": "of a nominal two-sided 5% test"},
    ]
