"""Premium shares of many fits on one calendar, and one Wald test for any joint hypothesis on them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.evidence.setting import Fit, Row
from carrylab.regression.bias import LARGE_BIAS
from carrylab.regression.longrun import cosine_count
from carrylab.regression.one_period import null_influence
from carrylab.regression.sample import Floats
from carrylab.regression.wald import Restrictions, Wald, restrictions, wald

ZERO, EQUAL = "all premium shares zero", "all premium shares equal"
SAME_FACT = 0.995  # correlation of influence series from which two parities are one fact within rounding
OVERSIZED = "on request, to match papers: measured to reject 31 to 77% of true nulls at 10 to 20 restrictions"


@dataclass(frozen=True, eq=False, slots=True)
class Stack:
    """Premium shares of m fits: `names` (m,), `values` (m,), influence `series` (T, m) on the joint calendar.

    `null` (T, m): one-period series under the null of no premium (Hodrick 1992), or None where a fit has none or its
    bias is .3 standard errors or more. `overlap` is the largest in the stack. `same`: fits left out, each with the
    one before it that says the same.
    """

    names: tuple[str, ...]
    values: Floats
    series: Floats
    null: Floats | None
    overlap: int
    same: tuple[tuple[str, str], ...] = ()


def stack(fits: Sequence[Fit], names: Sequence[str]) -> Stack:
    """Premium shares of fits whose calendars have one interval; every fit has a return leg and weights."""
    legs = [fit.leg_of("return") or 0 for fit in fits]
    weights = np.array([fit.weights[leg] for fit, leg in zip(fits, legs, strict=True)])
    values = weights * np.array([fit.estimate.coefficients[0, leg] for fit, leg in zip(fits, legs, strict=True)])
    influence = [fit.estimate.influence[:, 0, leg] for fit, leg in zip(fits, legs, strict=True)]
    small = all(fit.errors.bias is not None and abs(fit.errors.bias.ratio) < LARGE_BIAS for fit in fits)
    held = small and all(fit.headline.kinds[leg] == "one-period" for fit, leg in zip(fits, legs, strict=True))
    null = None
    if held:
        own = [null_influence(fit.sample, fit.estimate, leg).series[:, 0] for fit, leg in zip(fits, legs, strict=True)]
        null = _placed(fits, own) * weights
    overlap = max(fit.sample.overlap for fit in fits)
    return Stack(tuple(names), values, _placed(fits, influence) * weights, null, overlap)


def _placed(fits: Sequence[Fit], columns: Sequence[Floats]) -> Floats:
    """Series of single fits side by side on the union of their periods (T, m)."""
    numbers = np.unique(np.concatenate([fit.parity.calendar.ordinals for fit in fits]))
    found = np.zeros((len(numbers), len(fits)))
    for at, (fit, column) in enumerate(zip(fits, columns, strict=True)):
        found[np.searchsorted(numbers, fit.parity.calendar.ordinals), at] = column
    return found


def distinct(whole: Stack) -> Stack:
    """The stack without fits that say the same as one before them, within rounding."""
    length = np.sqrt((whole.series**2).sum(axis=0))
    kept: list[int] = []
    same: list[tuple[str, str]] = []
    for j, name in enumerate(whole.names):
        alike = (i for i in kept if whole.series[:, i] @ whole.series[:, j] > SAME_FACT * length[i] * length[j])
        found = next(alike, None)
        if found is None:
            kept.append(j)
        else:
            same.append((name, whole.names[found]))
    null = None if whole.null is None else whole.null[:, kept]
    names = tuple(whole.names[i] for i in kept)
    return Stack(names, whole.values[kept], whole.series[:, kept], null, whole.overlap, tuple(same))


def zero(of: Stack) -> Restrictions:
    """Every premium share is zero."""
    return restrictions([f"{name} = 0" for name in of.names], np.eye(len(of.names)))


def equal(of: Stack) -> Restrictions:
    """All premium shares are the first one's."""
    count = len(of.names)
    matrix = np.hstack([np.ones((count - 1, 1)), -np.eye(count - 1)])
    return restrictions([f"{of.names[0]} = {name}" for name in of.names[1:]], matrix)


def joint_row(of: Stack, hypothesis: Restrictions, kind: str, term: str) -> Row:
    """Columns of one joint test.

    `kind` "auto": for zeros the stacked one-period series where there are any, else cosines with F and at most half as
    many as there are independent windows, marked as the fallback; equality is no null of 1B and always takes cosines.
    "cosine" and "bartlett" as asked; one lag or number of cosines for the whole system.
    """
    one_period = kind == "auto" and term == ZERO and of.null is not None
    law = "date" if one_period else "bartlett" if kind == "bartlett" else "cosine"
    series = of.null if one_period and of.null is not None else of.series
    cosines = fallback_cosines(series, of.overlap) if law == "cosine" else None
    row: Row = {"section": "joint", "rank": _rank(law, kind, term), "term": term}
    try:
        found = wald(series, of.values, hypothesis, kind=law, lags=of.overlap, cosines=cosines)
    except InferenceError as refused:
        return row | {"note": str(refused)}
    return row | {
        "estimate": float(found.df),
        "statistic": found.statistic,
        "df": found.df_denominator,
        "p_value": found.p_value,
        "lags": found.cosines if law == "cosine" else 0 if one_period else of.overlap,
        "method": _method(found, of.overlap),
        "note": "; ".join(_notes(of, found, law)),
    }


def fallback_cosines(series: Floats, overlap: int) -> int:
    """At most half as many cosines as there are independent windows on dates that any of the series (T, m) uses."""
    n = int((series != 0).any(axis=1).sum())
    return max(2, min(cosine_count(n, overlap), n // (2 * (overlap + 1))))


def _rank(law: str, kind: str, term: str) -> str:
    """What a test by cosines that stands in for draws or 1B is called."""
    return "fallback" if law == "cosine" and kind == "auto" and term == ZERO else "headline"


def _method(found: Wald, overlap: int) -> str:
    if found.kind == "cosine":
        return f"{found.law} from {found.cosines} equal-weighted cosines, overlap {overlap}"
    if found.kind == "bartlett":
        return f"{found.law}, Bartlett lag {found.lags}"
    return f"{found.law} from stacked one-period errors (Hodrick 1B), overlap {overlap}"


def _notes(of: Stack, found: Wald, law: str) -> list[str]:
    said = [f"redundant: {', '.join(found.dropped)}"] if found.dropped else []
    said += [f"{name} says the same as {other}" for name, other in of.same]
    return [*said, OVERSIZED] if law == "bartlett" else said
