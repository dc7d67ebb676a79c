"""The same regressions by other people's code: slopes, constants, R2 and errors recomputed on the same sample."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.covariance import ErrorOptions, Errors, standard_errors
from carrylab.regression.effects import Effects
from carrylab.regression.fit import Estimate, fit
from carrylab.regression.longrun import longrun
from carrylab.regression.sample import Floats, Sample

if TYPE_CHECKING:
    import pandas as pd

PANEL, SERIES = "linearmodels PanelOLS", "statsmodels OLS"
EXACT_FIT = 1e-12  # 1 - R2 below this is rounding, so there is no error to compare
DUMMIES = 2_000_000  # most cells of a design matrix with dummies
NO_COUNTERPART = (
    "one-period (Hodrick 1B): no counterpart",
    "equal-weighted cosines: no counterpart",
    "clustered: both with one factor: no counterpart",
    "IVX instrument, fixed-b laws, clusters with lags, draws: no counterpart",
)
# Our error kind and factor beside the same thing in PanelOLS.
PANEL_KINDS: dict[tuple[str, str], dict[str, Any]] = {
    ("classical", "n/(n-k)"): {"cov_type": "unadjusted"},
    ("robust", "n/(n-k)"): {"cov_type": "robust"},
    ("bartlett", "n/(n-k)"): {"cov_type": "kernel", "kernel": "bartlett"},
    ("clustered: entity", "clusters"): {"cov_type": "clustered", "cluster_entity": True, "group_debias": True},
    ("clustered: date", "clusters"): {"cov_type": "clustered", "cluster_time": True, "group_debias": True},
    ("clustered: both", "clusters"): {
        "cov_type": "clustered",
        "cluster_entity": True,
        "cluster_time": True,
        "group_debias": True,
    },
}


@dataclass(frozen=True, slots=True)
class Comparison:
    """One quantity of one regression, ours and theirs.

    `difference` is |ours - theirs| over the larger of |theirs| and, for a coefficient, its standard error.
    """

    sample: str
    leg: str
    term: str
    quantity: str
    against: str
    ours: float
    theirs: float
    difference: float


@dataclass(frozen=True, slots=True)
class Audit:
    """All comparisons, and in words what could not be compared."""

    comparisons: tuple[Comparison, ...]
    not_compared: tuple[str, ...]

    def largest(self) -> dict[tuple[str, str], float]:
        """Largest relative difference of each (quantity, against)."""
        found: dict[tuple[str, str], float] = {}
        for row in self.comparisons:
            key = (row.quantity, row.against)
            found[key] = max(found.get(key, 0.0), row.difference)
        return found

    def lines(self) -> list[str]:
        """The audit as printed lines: one a quantity, then what has no counterpart."""
        counts: dict[tuple[str, str], int] = {}
        for row in self.comparisons:
            counts[row.quantity, row.against] = counts.get((row.quantity, row.against), 0) + 1
        compared = [
            f"{quantity}, {counts[quantity, against]} against {against}: largest relative difference {gap:.1e}"
            for (quantity, against), gap in self.largest().items()
        ]
        names = {row.sample for row in self.comparisons}
        split = (text.partition(": ") for text in self.not_compared)
        reasons = Counter(rest if name in names else f"{name}{colon}{rest}" for name, colon, rest in split)
        return compared + [
            f"not compared: {reason}" + (f" ({count} samples)" if count > 1 else "")
            for reason, count in reasons.items()
        ]


def audit(samples: Sequence[tuple[str, Sample]], effects: Effects, options: ErrorOptions) -> Audit:
    """Recompute every (name, sample) with linearmodels and statsmodels, for every kind of error they have.

    `options.lags` is the lag of the kernels, the overlap where it is None. Errors without a lag are compared too,
    forced where outcomes overlap: the point is arithmetic, not whether they suit.
    """
    comparisons: list[Comparison] = []
    missing: dict[str, None] = dict.fromkeys(NO_COUNTERPART)
    for name, sample in samples:
        estimate = fit(sample, effects=effects)
        frame = _frame(sample)
        lags = sample.overlap if options.lags is None else options.lags
        for leg in range(len(sample.legs)):
            if not estimate.r2[leg] < 1.0 - EXACT_FIT:
                missing[f"{name}, {sample.legs[leg]}: the leg is fitted exactly, there is no error to compare"] = None
                continue
            one = _OneLeg(name, sample, estimate, frame, leg, lags)
            for found in (_against_panel(one), _against_series(one)):
                for row in found:
                    if isinstance(row, str):
                        missing[row] = None
                    else:
                        comparisons.append(row)
    return Audit(tuple(comparisons), tuple(missing))


@dataclass(frozen=True, eq=False, slots=True)
class _OneLeg:
    """One leg of one sample, its rows in a frame sorted by date."""

    name: str
    sample: Sample
    estimate: Estimate
    frame: pd.DataFrame
    leg: int
    lags: int


def _frame(sample: Sample) -> pd.DataFrame:
    import pandas as pd

    t, i = np.nonzero(sample.mask)
    columns: dict[str, Any] = {"entity": i, "date": t}
    columns |= {f"x{k}": sample.x[t, i, k] for k in range(len(sample.terms))}
    columns["const"] = 1.0
    columns |= {f"y{leg}": sample.y[t, i, leg] for leg in range(len(sample.legs))}
    return pd.DataFrame(columns)


def _errors(one: _OneLeg, kind: str, factor: Any) -> Errors:
    """Our errors of one kind: with the kernel's lag, or forced where the kind has none."""
    lags = one.lags if kind in ("bartlett", "rectangular") else 0
    return standard_errors(one.sample, one.estimate, ErrorOptions(kind, lags, factor))


def _against_panel(one: _OneLeg) -> Iterator[Comparison | str]:
    from linearmodels.panel import PanelOLS

    data = one.frame.set_index(["entity", "date"]).sort_index()
    terms = [f"x{k}" for k in range(len(one.sample.terms))] + ["const"]
    model = PanelOLS(
        data[f"y{one.leg}"],
        data[terms],
        entity_effects=one.estimate.effects in ("entity", "both"),
        time_effects=one.estimate.effects in ("time", "both"),
    )
    fitted = None
    for (kind, factor), config in PANEL_KINDS.items():
        if kind == "bartlett" and one.estimate.n_dates <= one.estimate.last - one.estimate.first:
            yield f"{one.name}: bartlett against {PANEL}, which counts lags by row and this calendar has holes"
            continue
        chosen = config | ({"bandwidth": one.lags} if kind == "bartlett" else {})
        try:
            ours = _errors(one, kind, factor)
        except InferenceError as refused:
            yield f"{one.name}: {kind}: {refused}"
            continue
        if any("stands in its place" in text for text in ours.warnings):
            yield f"{one.name}: {kind} is replaced where a variance is not positive"
            continue
        fitted = model.fit(debiased=True, **chosen)
        yield from _compare_errors(one, ours, np.asarray(fitted.std_errors), f"std_error, {kind}", PANEL)
    if fitted is not None:
        yield from _compare_fit(one, np.asarray(fitted.params), PANEL)
        r2 = float(one.estimate.r2[one.leg])
        yield _row(one, "r2", "", PANEL, r2, float(fitted.rsquared), abs(float(fitted.rsquared)))


def _against_series(one: _OneLeg) -> Iterator[Comparison | str]:
    """Kernel errors by dummies and sums over dates; the calendar is kept, so holes are no obstacle."""
    import statsmodels.api as sm
    from statsmodels.stats import sandwich_covariance as sandwich

    design = _design(one)
    if design is None:
        yield f"{one.name}: {SERIES} would need more than {DUMMIES:,} cells of dummies"
        return
    order = one.frame["date"].to_numpy()
    result = sm.OLS(one.frame[f"y{one.leg}"].to_numpy(), design).fit()
    k = len(one.sample.terms) + (one.estimate.effects == "none")
    yield from _compare_fit(one, np.asarray(result.params)[:k], SERIES)
    for kind, weigh in (("bartlett", sandwich.weights_bartlett), ("rectangular", sandwich.weights_uniform)):
        if kind == "rectangular" and longrun(one.estimate.influence[:, :, one.leg], kind, lags=one.lags).problem:
            yield f"{one.name}: rectangular is replaced where it is not positive definite"
            continue
        meat = sandwich.S_hac_groupsum(
            design * np.asarray(result.resid)[:, None], order, nlags=one.lags, weights_func=weigh
        )
        inverse = np.asarray(result.normalized_cov_params)
        theirs = np.sqrt(np.diag(inverse @ meat @ inverse)[:k])
        yield from _compare_errors(one, _errors(one, kind, "none"), theirs, f"std_error, {kind}", SERIES)


def _design(one: _OneLeg) -> Floats | None:
    """Terms, constant and dummies; None where that would be too large."""
    columns = [one.frame[f"x{k}"].to_numpy() for k in range(len(one.sample.terms))] + [np.ones(len(one.frame))]
    wanted = {"none": (), "entity": ("entity",), "time": ("date",), "both": ("entity", "date")}[one.estimate.effects]
    labels = [one.frame[name].to_numpy() for name in wanted]
    if len(one.frame) * sum(len(np.unique(label)) for label in labels) > DUMMIES:
        return None
    dummies = [(label == level).astype(np.float64) for label in labels for level in np.unique(label)[1:]]
    return np.column_stack(columns + dummies)


def _compare_fit(one: _OneLeg, theirs: Floats, against: str) -> Iterator[Comparison]:
    """Slopes, and the constant where it means the same."""
    own = one.estimate.coefficients[: len(theirs), one.leg]
    spread = np.sqrt(np.diag(one.estimate.bread) * one.estimate.squares[one.leg, one.leg] / one.estimate.n_obs)
    for term, ours, other, error in zip(one.estimate.terms, own, theirs, spread, strict=False):
        quantity = "const" if term == "const" else "slope"
        yield _row(one, quantity, term, against, float(ours), float(other), max(abs(float(other)), float(error)))


def _compare_errors(one: _OneLeg, errors: Errors, theirs: Floats, quantity: str, against: str) -> Iterator[Comparison]:
    own = errors.std_error[: len(theirs), one.leg]
    for term, ours, other in zip(one.estimate.terms, own, theirs, strict=False):
        yield _row(one, quantity, term, against, float(ours), float(other), abs(float(other)))


def _row(one: _OneLeg, quantity: str, term: str, against: str, ours: float, theirs: float, scale: float) -> Comparison:
    gap = abs(ours - theirs) / scale if scale > 0 else abs(ours - theirs)
    return Comparison(one.name, one.sample.legs[one.leg], term, quantity, against, ours, theirs, gap)
