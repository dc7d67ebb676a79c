"""Rolling and expanding windows with Driscoll-Kraay errors in each, beside what a user would otherwise run."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

if TYPE_CHECKING:
    from carrylab.regression.sample import Sample

MONTHS, DAYS, N, K, LENGTH, LAGS = 720, 12_500, 10, 3, 120, 5
SAMPLED = 12  # windows that the slow side is timed at


def best(work: Callable[[], object], repeats: int = 3) -> float:
    """Shortest wall-clock time of several runs, in seconds."""
    spent = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        spent.append(time.perf_counter() - start)
    return min(spent)


def sample_of(T: int) -> Sample:
    """A balanced panel of ten entities and three regressors."""
    from carrylab.regression.sample import make_sample

    rng = np.random.default_rng(1)
    x = rng.standard_normal((T, N, K))
    y = x @ np.array([0.5, 0.1, 0.0]) + rng.standard_normal((T, N)) + rng.standard_normal((T, 1))
    return make_sample(
        x,
        y[:, :, None],
        terms=("a", "b", "c"),
        legs=("return",),
        steps=np.ones(T),
        overlap=0,
        one_step=[None],
    )


def by_statsmodels(sample: Sample, start: int, stop: int) -> None:
    """One window: entity means out, least squares, and Driscoll-Kraay errors."""
    import statsmodels.api as sm

    x, y = sample.x[start:stop], sample.y[start:stop, :, 0]
    flat = (x - x.mean(axis=0)).reshape(-1, K)
    time_of = np.repeat(np.arange(stop - start), N)
    found = sm.OLS((y - y.mean(axis=0)).ravel(), flat)
    found.fit(cov_type="hac-groupsum", cov_kwds={"time": time_of, "maxlags": LAGS})


def by_panel_ols(sample: Sample, start: int, stop: int) -> None:
    """One window by linearmodels with entity effects and a Bartlett kernel of the same lag."""
    from linearmodels import PanelOLS

    index = pd.MultiIndex.from_product([range(N), range(stop - start)])
    x = pd.DataFrame(sample.x[start:stop].transpose(1, 0, 2).reshape(-1, K), index=index, columns=list("abc"))
    y = pd.Series(sample.y[start:stop, :, 0].T.ravel(), index=index, name="y")
    PanelOLS(y, x, entity_effects=True).fit(cov_type="kernel", kernel="bartlett", bandwidth=LAGS)


def slow(run: Callable[[Sample, int, int], None], sample: Sample, spans: list[tuple[int, int]], count: int) -> float:
    """Seconds that a loop over `count` windows would take, from a sample of them."""
    return best(lambda: [run(sample, *span) for span in spans], 1) / len(spans) * count


def lines() -> Iterator[str]:
    """Ratios with their goals."""
    from carrylab.regression.windows import expanding, rolling

    days, months = sample_of(DAYS), sample_of(MONTHS)
    count = DAYS - LENGTH + 1
    at = np.linspace(0, count - 1, SAMPLED).astype(int)
    spans = [(int(start), int(start) + LENGTH) for start in at]
    ours = best(lambda: rolling(days, LENGTH, 0, lags=LAGS))
    plain, panel = (slow(run, days, spans, count) for run in (by_statsmodels, by_panel_ols))
    yield (
        f"rolling windows of {LENGTH}, {DAYS:,} dates: {ours:.2f} s, {plain / ours:.0f} times a statsmodels loop (goal "
        f"60), {panel / ours:.0f} times PanelOLS (goal 1200)"
    )
    ends = [(0, int(start) + LENGTH) for start in at]
    ours = best(lambda: expanding(days, LENGTH, 0, lags=LAGS))
    short = best(lambda: expanding(months, LENGTH, 0, lags=LAGS))
    plain = slow(by_statsmodels, days, ends, count)
    yield (
        f"expanding windows, {DAYS:,} dates: {ours:.2f} s, {plain / ours:.0f} times a statsmodels loop (goal 2000); "
        f"{ours / short:.0f} times the time of {MONTHS} dates (goal: at most 22)"
    )
