"""Seconds for draws under the null, on one core and on two: `python scripts/bench_draws.py`."""

from __future__ import annotations

import time
from concurrent.futures import ThreadPoolExecutor

import numpy as np

from carrylab.regression.draws import Case, Scheme, draw
from carrylab.regression.draws_measure import Question
from carrylab.regression.sample import Floats, OneStep, make_sample

DRAWS = 9_999


def panel(dates: int, entities: int, horizon: int, *, holes: float = 0.0) -> Case:
    """A currency panel: persistent differentials, returns that nothing predicts, and all entities pooled and alone."""
    rng = np.random.default_rng(1)
    signal = persistent(rng, dates, entities)
    signal[rng.random((dates, entities)) < holes] = np.nan
    outcome = 0.03 * rng.standard_normal((dates, entities))
    leg = np.full((dates, entities), np.nan)
    for t in range(dates - horizon):
        leg[t] = outcome[t + 1 : t + 1 + horizon].sum(axis=0)
    sample = make_sample(
        signal[:, :, None],
        leg[:, :, None],
        terms=["signal"],
        legs=["excess return"],
        steps=np.where(np.arange(dates) < dates - horizon, horizon, 0),
        overlap=horizon - 1,
        one_step=[OneStep(outcome, np.ones(horizon))],
    )
    groups = (np.arange(entities), *(np.array([i]) for i in range(entities)))
    names = tuple(f"entity {i + 1}" for i in range(entities))
    return Case(Question(sample, 0, 0.0, "entity"), signal, groups, names)


def persistent(rng: np.random.Generator, dates: int, entities: int) -> Floats:
    """First-order autoregressions with root .97."""
    signal = rng.standard_normal((dates, entities))
    for t in range(1, dates):
        signal[t] = 0.97 * signal[t - 1] + 0.24 * signal[t]
    return signal


def seconds(cases: list[Case], *, workers: int, scheme: Scheme = "resampled") -> float:
    """Wall-clock time of one call."""
    with ThreadPoolExecutor(workers) as pool:
        start = time.perf_counter()
        draw(cases, DRAWS, seed=0, scheme=scheme, spread=pool.map)
        return time.perf_counter() - start


def main() -> None:
    """Print one line a panel."""
    for dates, entities, horizon, holes in (
        (360, 10, 12, 0.0),
        (360, 10, 12, 0.02),
        (360, 1, 12, 0.0),
        (720, 10, 60, 0.0),
    ):
        case = panel(dates, entities, horizon, holes=holes)
        times = [seconds([case], workers=1), seconds([case], workers=2), seconds([case], workers=1, scheme="wild")]
        print(
            f"{DRAWS:,} draws, T {dates}, N {entities}, h {horizon}, holes {holes:.0%}, {len(case.groups)} hypotheses, "
            f"slope, R2 and both t: {times[0]:.1f} s on one core, {times[1]:.1f} s on two, wild {times[2]:.1f} s on one"
        )


if __name__ == "__main__":
    main()
