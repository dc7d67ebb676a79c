"""The world of the expectations hypothesis: whole yield curves, then signals, returns and one-period returns."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from carrylab.regression.draws_curve import Claims, claims_of, simulate_curves
from carrylab.regression.draws_curve_null import CurveNull
from carrylab.regression.sample import Floats, Ints
from carrylab.regression.simulated import Outcomes, Simulated


@dataclass(frozen=True, eq=False, slots=True)
class Life:
    """How the claims of one regression earn their return period by period: weights (H+1, E, M) on yields.

    `worth[s]` times the yields of the date is what a claim is worth s periods after its origin, less the holding
    period's bond: step s earns worth[s] at t + s less worth[s-1] at t + s - 1, and all steps add up to the return.
    """

    worth: Floats


def life_of(maturities: Ints, long: Ints, holding: int, scale: Floats) -> Life:
    """The life of zero-coupon bonds of `long` (E,) periods held `holding` periods; `scale` (E,): years a period.

    p(n) = -n y(n): after s periods the bond has n - s left and the one that matures at the horizon h - s.
    """
    place = {int(n): at for at, n in enumerate(maturities)}
    worth = np.zeros((holding + 1, len(long), len(maturities)))
    for s in range(holding + 1):
        for e, n in enumerate(long):
            worth[s, e, place[int(n) - s]] -= (n - s) * scale[e]
            if s < holding:
                worth[s, e, place[holding - s]] += (holding - s) * scale[e]
    return Life(worth)


@dataclass(frozen=True, eq=False, slots=True)
class CurveWorld:
    """Curves of several economies, and the regressions on them: claims, and their lives where the data have them.

    A slope of b adds b x_t to the return, in equal parts to its steps, without solving the curve anew.
    """

    null: CurveNull
    maturities: Ints
    dates: int
    claims: tuple[Claims, ...]
    lives: tuple[Life | None, ...]

    @property
    def size(self) -> int:
        """Numbers in one sample of all yields."""
        return self.dates * len(self.null.roots) * len(self.maturities)

    def simulate(self, stream: np.random.Generator, count: int) -> tuple[Simulated, ...]:
        """`count` samples of every regression, all from the same curves."""
        return self.samples(self.yields(stream, count))

    def yields(self, stream: np.random.Generator, count: int) -> Floats:
        """`count` samples of all yields, less their means (T, N, M, B)."""
        return simulate_curves(self.null, self.maturities, (self.dates, count), stream)

    def samples(self, yields: Floats) -> tuple[Simulated, ...]:
        """Every regression's samples of some yields (T, N, M, B)."""
        return tuple(_sample(claims, life, yields) for claims, life in zip(self.claims, self.lives, strict=True))


def _sample(claims: Claims, life: Life | None, yields: Floats) -> Simulated:
    signal, held = claims_of(claims, yields)
    return Simulated(signal, np.stack([held, signal]), None if life is None else _steps(claims, life, yields))


def _steps(claims: Claims, life: Life, yields: Floats) -> Outcomes:
    """One-period returns by origin, asked for step by step from the first on."""
    last: list[Floats] = []

    def outcomes(step: int) -> Floats:
        before = _worth(claims, life.worth[0], yields) if step == 1 else last.pop()
        now = _worth(claims, life.worth[step], yields)
        found = np.zeros_like(now)
        found[:-step] = now[step:]
        found[: len(now) - step + 1] -= before[step - 1 :]
        last[:] = [now]
        return found

    return outcomes


def _worth(claims: Claims, weights: Floats, yields: Floats) -> Floats:
    """What every claim is worth on every date (T, E, B), by weights (E, M) on the yields."""
    T, _, _, B = yields.shape
    found = np.zeros((T, len(claims.economy), B))
    for e, economy in enumerate(claims.economy):
        for m in np.flatnonzero(weights[e]):
            found[:, e] += weights[e, m] * yields[:, economy, m]
    return found
