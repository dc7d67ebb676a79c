"""One Wald test for every joint hypothesis on stacked influence series."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_factor, cho_solve

from carrylab.errors import InferenceError
from carrylab.regression.law import chi_squared_tail, f_tail
from carrylab.regression.longrun import LongRun, longrun
from carrylab.regression.sample import Floats

REDUNDANT = 1e-8  # part of a restricted series' length that the series before it leave unexplained


@dataclass(frozen=True, eq=False, slots=True)
class Restrictions:
    """The hypothesis matrix x coefficients = values: `names` (q,), `matrix` (q, m), `values` (q,)."""

    names: tuple[str, ...]
    matrix: Floats
    values: Floats


@dataclass(frozen=True, slots=True)
class Wald:
    """Result of a joint test, its `law` in words; `kept` and `dropped` name the restrictions tested and the redundant.

    `df` restrictions and `df_denominator` (infinite for chi-squared); `lags`, `cosines`, `kind` and `problem` are those
    of the long-run sum.
    """

    statistic: float
    p_value: float
    law: str
    df: int
    df_denominator: float
    kept: tuple[str, ...]
    dropped: tuple[str, ...]
    kind: str
    lags: int
    cosines: int
    problem: str


def restrictions(names: Sequence[str], matrix: Floats, values: Floats | None = None) -> Restrictions:
    """Restrictions from arrays; values of None are zeros."""
    table = np.atleast_2d(np.asarray(matrix, dtype=np.float64))
    return Restrictions(tuple(names), table, np.zeros(len(table)) if values is None else np.asarray(values, float))


def wald(
    series: Floats,
    coefficients: Floats,
    hypothesis: Restrictions,
    *,
    kind: str,
    lags: int = 0,
    cosines: int | None = None,
) -> Wald:
    """Test matrix x coefficients = values by W = g' V^-1 g, V the long-run sum of the restricted series.

    `series` (T, m) stacked influence, `coefficients` (m,); `lags` is the largest overlap in the stack. A restriction
    whose series the ones before it explain is redundant: it is dropped and named. Chi-squared(q), or for cosines
    (nu - q + 1) / (nu q) W as F(q, nu - q + 1). One-period series under the null are tested with kind "date".
    Raises InferenceError when restrictions contradict each other, or exceed the degrees of freedom.
    """
    gaps = hypothesis.matrix @ coefficients - hypothesis.values
    restricted = series @ hypothesis.matrix.T
    kept = _independent(restricted, gaps, hypothesis.names)
    q = len(kept)
    run = longrun(restricted[:, kept], kind, lags=lags, cosines=cosines)
    _require_freedom(q, run, int(restricted.any(axis=1).sum()))
    statistic = float(gaps[kept] @ cho_solve(cho_factor(run.covariance), gaps[kept]))
    law, df_denominator, statistic, p_value = _by_law(statistic, q, run)
    return Wald(
        statistic=statistic,
        p_value=p_value,
        law=law,
        df=q,
        df_denominator=df_denominator,
        kept=tuple(hypothesis.names[j] for j in kept),
        dropped=tuple(name for j, name in enumerate(hypothesis.names) if j not in kept),
        kind=run.kind,
        lags=run.lags,
        cosines=run.cosines,
        problem=run.problem,
    )


def _by_law(statistic: float, q: int, run: LongRun) -> tuple[str, float, float, float]:
    if math.isinf(run.df):
        return f"chi-squared({q})", math.inf, statistic, chi_squared_tail(statistic, q)
    rest = run.df - q + 1
    f_statistic = statistic * rest / (run.df * q)
    return f"F({q}, {rest:.0f})", rest, f_statistic, f_tail(f_statistic, q, rest)


def _require_freedom(q: int, run: LongRun, dates: int) -> None:
    room = min(run.df, dates - 1)
    if q > room:
        raise InferenceError(
            f"{q} restrictions exceed the {room:.0f} degrees of freedom of the {run.kind} covariance; test fewer"
        )


def _independent(restricted: Floats, gaps: Floats, names: tuple[str, ...]) -> list[int]:
    """Restrictions whose series are not explained by those before them; a redundant one must agree with them."""
    length = np.sqrt((restricted**2).sum(axis=0))
    scale = np.where(length > 0, length, 1.0)
    kept: list[int] = []
    for j, name in enumerate(names):
        explained, rest = _project(restricted[:, kept] / scale[kept], restricted[:, j] / scale[j])
        if length[j] > 0 and rest > REDUNDANT:
            kept.append(j)
        elif abs(gaps[j] / scale[j] - explained @ (gaps[kept] / scale[kept])) > REDUNDANT * (
            1 + abs(gaps[j] / scale[j])
        ):
            raise InferenceError(f"restriction '{name}' contradicts the ones before it: together they cannot hold")
    if not kept:
        raise InferenceError(f"restriction '{names[0]}' has no sampling variation: there is nothing to test")
    return kept


def _project(basis: Floats, target: Floats) -> tuple[Floats, float]:
    """Coefficients of the target on the basis and the length of what is left."""
    if not basis.shape[1]:
        return np.zeros(0), float(np.sqrt(target @ target))
    found = np.asarray(np.linalg.lstsq(basis, target, rcond=None)[0], dtype=np.float64)
    rest = target - basis @ found
    return found, float(np.sqrt(rest @ rest))
