"""The tests whose size is measured: what each says of one sample at a nominal 5%."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.draws import Case, draw
from carrylab.regression.draws_curve import Claims, Curves, draw_curves
from carrylab.regression.draws_measure import Question
from carrylab.regression.draws_tests import equal_tailed, joint, rarity
from carrylab.regression.fit import fit
from carrylab.regression.instrument import instrument, instrument_null
from carrylab.regression.law import statistics
from carrylab.regression.one_period import null_influence
from carrylab.regression.sample import Bools, Floats, Sample
from carrylab.regression.wald import restrictions, wald

LEVEL = 0.05
ROUNDING = 1e-9  # a p of exactly 5% rejects
Kinds = tuple[str, ...]


def by_kind(sample: Sample, kinds: Kinds, *, slope: float = 0.0) -> dict[str, bool]:
    """Whether each kind of error rejects the signal's true slope."""
    estimate = fit(sample, effects="entity")
    found = {}
    for kind in kinds:
        errors = standard_errors(sample, estimate, ErrorOptions(kind, 0 if kind.startswith("clustered") else None))
        value, error = errors.estimate.coefficients[0, 0], errors.std_error[0, 0]
        test = statistics(value, error, slope, errors.df[0], 1 - LEVEL, errors.bandwidth[0])
        found[kind] = bool(test.p_value < LEVEL)
    return found


def stacked(samples: Sequence[Sample]) -> dict[str, bool]:
    """Whether stacked one-period series under the null reject that all slopes are zero, of 1B and of the instrument."""
    fits = [fit(sample, effects="entity") for sample in samples]
    carried = [instrument(sample, estimate) for sample, estimate in zip(samples, fits, strict=True)]
    one_period = [null_influence(sample, estimate, 0) for sample, estimate in zip(samples, fits, strict=True)]
    found = {
        "stacked one-period": (fits, one_period),
        "stacked instrument": ([one.estimate for one in carried], [instrument_null(one, 0) for one in carried]),
    }
    names = [str(number) for number in range(len(samples))]
    rejected = {}
    for test, (estimates, parts) in found.items():
        series = np.stack([part.series[:, 0] for part in parts], axis=1)
        slopes = np.array([estimate.coefficients[0, 0] for estimate in estimates])
        p_value = wald(series, slopes, restrictions(names, np.eye(len(samples))), kind="date").p_value
        rejected[test] = p_value < LEVEL
    return rejected


def drawn_returns(samples: Sequence[Sample], signal: Floats, draws: int, seed: int) -> tuple[Floats, Floats]:
    """One-period t (H,) of pooled panels drawn together, and its draws (B, H); `signal` (T, N) on all dates."""
    N = signal.shape[1]
    names = tuple(f"E{i}" for i in range(N))
    cases = [Case(Question(sample, 0, 0.0, "entity"), signal, (np.arange(N),), names) for sample in samples]
    found = draw(cases, draws, seed=seed)
    return found.data.one_period, found.draws.one_period


def drawn_curves(curves: Curves, claims: Claims, draws: int, seed: int) -> tuple[Floats, Floats]:
    """Cosine t (H,) of every group of bonds and its draws (B, H)."""
    found = draw_curves(curves, [claims], draws, seed=seed)
    return found.data.cosine, found.draws.cosine


def each_rejects(statistic: Floats, drawn: Floats) -> Bools:
    """Whether the equal-tailed p of each hypothesis rejects (H,)."""
    return np.asarray(equal_tailed(statistic, drawn) <= LEVEL + ROUNDING)


def jointly_reject(statistic: Floats, drawn: Floats, sets: Mapping[str, Sequence[int]]) -> dict[str, bool]:
    """Whether the rarest statistic of each named set of hypotheses rejects them together."""
    return {
        name: joint(*rarity(statistic[list(columns)], drawn[:, list(columns)])) <= LEVEL + ROUNDING
        for name, columns in sets.items()
    }
