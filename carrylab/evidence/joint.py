"""Joint hypotheses on the groups of one parity: every premium share zero, and all of them equal."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from carrylab.errors import InferenceError
from carrylab.evidence.setting import Fit, Row
from carrylab.regression.longrun import cosine_count
from carrylab.regression.one_period import null_influence
from carrylab.regression.sample import Floats
from carrylab.regression.wald import Restrictions, Wald, restrictions, wald

ALL_ZERO, ALL_EQUAL = "all premium shares zero", "all premium shares equal"


def group_rows(fits: Sequence[Fit]) -> list[Row]:
    """Rows of section `joint` for the groups of one parity and horizon; none where there are fewer than two.

    Zero: one-period errors stacked (Hodrick 1992, 1B) where every group has them. Otherwise, and for equality, which
    is no null of 1B, cosines with F and at most half as many as there are independent windows.
    """
    if len(fits) < 2 or any(fit.leg_of("return") is None or not fit.has_identity for fit in fits):
        return []
    legs = [fit.leg_of("return") or 0 for fit in fits]
    weights = np.array([fit.weights[leg] for fit, leg in zip(fits, legs, strict=True)])
    values = weights * np.array([fit.estimate.coefficients[0, leg] for fit, leg in zip(fits, legs, strict=True)])
    names = [f"{fit.group} = 0" for fit in fits]
    zero = restrictions(names, np.eye(len(fits)))
    pairs = np.hstack([np.ones((len(fits) - 1, 1)), -np.eye(len(fits) - 1)])
    equal = restrictions([f"{fits[0].group} = {fit.group}" for fit in fits[1:]], pairs)
    if all(fit.headline.kinds[leg] == "one-period" for fit, leg in zip(fits, legs, strict=True)):
        columns = [
            null_influence(fit.sample, fit.estimate, leg).series[:, 0] for fit, leg in zip(fits, legs, strict=True)
        ]
        first = _row(fits, ALL_ZERO, np.stack(columns, axis=1) * weights, values, (zero, "date"))
    else:
        first = _row(fits, ALL_ZERO, _influence(fits, legs) * weights, values, (zero, "cosine"))
    return [first, _row(fits, ALL_EQUAL, _influence(fits, legs) * weights, values, (equal, "cosine"))]


def _influence(fits: Sequence[Fit], legs: Sequence[int]) -> Floats:
    return np.stack([fit.estimate.influence[:, 0, leg] for fit, leg in zip(fits, legs, strict=True)], axis=1)


def _row(fits: Sequence[Fit], term: str, series: Floats, values: Floats, test: tuple[Restrictions, str]) -> Row:
    hypothesis, kind = test
    place = fits[0].place()
    kept = {name: place[name] for name in ("market", "parity", "horizon", "interval")}
    row = kept | {"section": "joint", "group": "all groups", "sample": "all", "term": term}
    overlap = max(fit.sample.overlap for fit in fits)
    try:
        found = wald(series, values, hypothesis, kind=kind, lags=overlap, cosines=_cosines(series, overlap, kind))
    except InferenceError as refused:
        return row | {"note": str(refused)}
    return row | {
        "statistic": found.statistic,
        "df": found.df_denominator,
        "p_value": found.p_value,
        "lags": found.cosines,
        "method": _method(found, overlap),
        "note": f"redundant: {', '.join(found.dropped)}" if found.dropped else "",
    }


def _cosines(series: Floats, overlap: int, kind: str) -> int | None:
    return fallback_cosines(series, overlap) if kind == "cosine" else None


def fallback_cosines(series: Floats, overlap: int) -> int:
    """At most half as many cosines as there are independent windows on dates that any of the series (T, m) uses."""
    n = int((series != 0).any(axis=1).sum())
    return max(2, min(cosine_count(n, overlap), n // (2 * (overlap + 1))))


def _method(found: Wald, overlap: int) -> str:
    if found.kind == "cosine":
        return f"{found.law} from {found.cosines} equal-weighted cosines, overlap {overlap}"
    return f"{found.law} from stacked one-period errors (Hodrick 1B), overlap {overlap}"
