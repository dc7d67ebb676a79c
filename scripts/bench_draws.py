"""Seconds for draws under the null, on one core and on two: `python scripts/bench_draws.py`."""

from __future__ import annotations

import time
from concurrent.futures import ThreadPoolExecutor

import numpy as np

from carrylab.regression.draws import Case, Scheme, draw
from carrylab.regression.draws_curve import Claims, Curves, draw_curves, forward_spot_claims
from carrylab.regression.draws_curve_null import average_weights
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


def persistent(rng: np.random.Generator, dates: int, entities: int, root: float = 0.97) -> Floats:
    """First-order autoregressions of unit variance."""
    signal = rng.standard_normal((dates, entities))
    for t in range(1, dates):
        signal[t] = root * signal[t - 1] + (1 - root**2) ** 0.5 * signal[t]
    return signal


def seconds(cases: list[Case], *, workers: int, scheme: Scheme = "resampled") -> float:
    """Wall-clock time of one call."""
    with ThreadPoolExecutor(workers) as pool:
        start = time.perf_counter()
        draw(cases, DRAWS, seed=0, scheme=scheme, spread=pool.map)
        return time.perf_counter() - start


def curve() -> tuple[Claims, Curves]:
    """Forty years of one economy's curve, two roots and noise, and its five-year bond held a year."""
    rng, maturities = np.random.default_rng(2), np.array([1, 12, 24, 36, 48, 60])
    factors = 0.012 * np.stack([persistent(rng, 480, 1, root)[:, 0] for root in (0.93, 0.99)], axis=1)
    yields = 0.05 + factors @ average_weights(np.array([0.93, 0.99]), maturities).T
    yields += 3e-4 * rng.standard_normal(yields.shape)
    weights = forward_spot_claims(maturities, np.array([60]), 12, 1 / 12)
    signal, now, later = ((yields @ part[0])[:, None] for part in weights)
    leg = np.full((480, 1), np.nan)
    leg[:-12] = now[:-12] + later[12:]
    sample = make_sample(
        signal[:, :, None],
        leg[:, :, None],
        terms=["signal"],
        legs=["excess return"],
        steps=np.where(np.arange(480) < 468, 12, 0),
        overlap=11,
        one_step=[None],
    )
    claims = Claims(Question(sample, 0, 0.0, "entity"), (np.array([0]),), np.array([0]), *weights)
    return claims, Curves(yields[:, None], maturities, ("economy",))


def main() -> None:
    """Print one line a panel, and one for curves."""
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
    case, curves = curve()
    start = time.perf_counter()
    draw_curves(curves, [case], DRAWS, seed=0)
    print(
        f"{DRAWS:,} draws of a curve, T 480, six maturities, one claim: {time.perf_counter() - start:.1f} s on one core"
    )


if __name__ == "__main__":
    main()
