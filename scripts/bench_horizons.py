"""Slopes at sixty horizons for thirty currencies by five tenors, side by side with what a user would otherwise run."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator

import numpy as np
import pandas as pd

T, N, LONGEST = 720, 150, 60
SAMPLED = (12, 36, 60)  # horizons that the slow side is timed at


def best(work: Callable[[], object], repeats: int = 5) -> float:
    """Shortest wall-clock time of several runs, in seconds."""
    spent = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        spent.append(time.perf_counter() - start)
    return min(spent)


def textbook(x: np.ndarray, r: np.ndarray, h: int) -> tuple[float, float]:
    """One horizon in plain numpy: outcomes added up, entities' means out, Bartlett lag h - 1 on date scores."""
    y = sum(r[step : T - h + step] for step in range(1, h + 1))
    x = x[: T - h]
    x, y = x - x.mean(axis=0), y - y.mean(axis=0)
    slope = (x * y).sum() / (x * x).sum()
    scores = (x * (y - slope * x)).sum(axis=1)
    variance = scores @ scores
    for lag in range(1, h):
        variance += 2 * (1 - lag / h) * (scores[lag:] @ scores[:-lag])
    return float(slope), float(np.sqrt(variance) / (x * x).sum())


def panel_ols(x: np.ndarray, r: np.ndarray, h: int) -> None:
    """One horizon by linearmodels with Driscoll-Kraay errors of the same lag."""
    from linearmodels import PanelOLS

    y = sum(r[step : T - h + step] for step in range(1, h + 1))
    index = pd.MultiIndex.from_product([range(N), range(T - h)])
    data = pd.DataFrame({"y": y.T.ravel(), "x": x[: T - h].T.ravel()}, index=index)
    PanelOLS(data["y"], data[["x"]], entity_effects=True).fit(cov_type="kernel", kernel="bartlett", bandwidth=h - 1)


def lines() -> Iterator[str]:
    """The two ratios with their goals, after the numbers are seen to agree."""
    from carrylab.regression.cumulated import cumulated

    rng = np.random.default_rng(1)
    x, r = 0.1 * rng.standard_normal((T, N)).cumsum(axis=0), rng.standard_normal((T, N))
    horizons = range(1, LONGEST + 1)
    found = cumulated(x, r, horizons, null=False)
    known = np.array([textbook(x, r, h) for h in horizons])
    assert np.allclose(known, np.column_stack([found.slopes, found.bartlett]), rtol=1e-9)
    ours = best(lambda: cumulated(x, r, horizons, null=False))
    plain = best(lambda: [textbook(x, r, h) for h in horizons], 3)
    slow = np.mean([best(lambda h=h: panel_ols(x, r, h), 1) for h in SAMPLED]) * LONGEST
    yield (
        f"horizons 1 to {LONGEST}, {N} entities, {T} dates: {1000 * ours:.0f} ms, {slow / ours:.0f} times PanelOLS "
        f"(goal 133), {plain / ours:.1f} times a textbook numpy loop (goal 5.3)"
    )
