"""What a test is worth: its size, power and coverage, counted over simulated samples."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Protocol, TypeVar

import numpy as np

from carrylab.regression.law import critical
from carrylab.regression.sample import Bools, Floats, Ints
from carrylab.regression.simulated import Frame, side_by_side
from carrylab.regression.simulated_errors import Offer, measure
from carrylab.regression.simulated_forms import Found
from carrylab.regression.simulated_worlds import World

LEVEL = 0.05
POWER = 0.8
CHUNK, LARGEST = 1 << 18, 1 << 23  # numbers in one array of a chunk of samples: two megabytes, at most 64
FEWEST, MOST = 32, 200  # samples in one chunk
DOUBLINGS, HALVINGS = 12, 40


Made = TypeVar("Made")


class Workers(Protocol):
    """How chunks or samples go to workers: `map`, or the `map` of a pool of threads."""

    def __call__(
        self,
        work: Callable[[np.random.Generator, int], Made],
        streams: Iterable[np.random.Generator],
        numbers: Iterable[int],
        /,
    ) -> Iterable[Made]:
        """Results in the order of the streams."""


class Tested(Protocol):
    """A test of no premium in B simulated samples to which a slope of b was added."""

    def excess(self, b: float) -> Floats:
        """|t| over its nominal 5% critical value (B,): above one it rejects."""

    def covers(self, b: float, confidence: float) -> Bools:
        """Whether the interval holds b (B,)."""


@dataclass(frozen=True, eq=False, slots=True)
class OfKind:
    """The test by one kind of errors."""

    found: Found
    offer: Offer

    def excess(self, b: float) -> Floats:
        """|t| over its nominal 5% critical value (B,)."""
        return np.abs(_slope(self.found, b)) / self._reach(b, 1.0 - LEVEL)

    def covers(self, b: float, confidence: float) -> Bools:
        """Whether the interval holds b (B,)."""
        return np.asarray(np.abs(_slope(self.found, b) - b) <= self._reach(b, confidence))

    def _reach(self, b: float, confidence: float) -> Floats:
        """Half of the interval; without limit where the variance is not positive, for then there is no test."""
        variance = self.found.variance(b)
        error = np.sqrt(np.where(variance > 0, variance, np.inf))
        return critical(confidence, self.offer.df, self.offer.bandwidth) * error


def _slope(found: Found, b: float) -> Floats:
    slope: Floats = found.slope[0] + b * found.slope[1]
    return slope


@dataclass(frozen=True, eq=False, slots=True)
class Automatic:
    """The test that the automatic choice takes in each sample: `choose` gives its number at b, (B,) or (1,).

    `printed`: the test whose interval is printed beside the slope.
    """

    tests: tuple[Tested, ...]
    printed: Tested
    choose: Callable[[float], Ints]

    def excess(self, b: float) -> Floats:
        """|t| over its nominal 5% critical value (B,)."""
        return np.asarray(np.choose(self.choose(b), [test.excess(b) for test in self.tests]))

    def covers(self, b: float, confidence: float) -> Bools:
        """Whether the interval holds b (B,)."""
        return self.printed.covers(b, confidence)


def simulate(
    world: World, frames: Sequence[Frame], offers: Sequence[Sequence[Offer]], runs: int, *, seed: int, workers: Workers
) -> list[dict[str, Found]]:
    """Slopes and variances of `runs` samples of every regression of a world, by kind.

    Samples come in chunks with a stream of random numbers each, so any number of `workers` gives the same bits.
    """
    size = max(min(max(CHUNK // world.size, FEWEST), MOST, LARGEST // world.size), 1)
    counts = [min(size, runs - start) for start in range(0, runs, size)]

    def one_chunk(stream: np.random.Generator, count: int) -> list[dict[str, Found]]:
        drawn = world.simulate(stream, count)
        return [measure(*parts) for parts in zip(frames, drawn, offers, strict=True)]

    made = list(workers(one_chunk, np.random.default_rng(seed).spawn(len(counts)), counts))
    return [
        {kind: side_by_side([part[at][kind] for part in made]) for kind in made[0][at]} for at in range(len(frames))
    ]


@dataclass(frozen=True, slots=True)
class Worth:
    """What one test is worth over simulated samples.

    `size`: how often the true null is rejected at a nominal 5%. `power`, `coverage`: at each premium asked for.
    `nominal`: the smallest slope told from zero in 80% of samples; `smallest`: the same where the critical value is
    raised until no more than 5% of true nulls are rejected. NaN where there is none.
    """

    size: float
    power: tuple[float, ...]
    coverage: tuple[float, ...]
    nominal: float
    smallest: float


def worth(test: Tested, slopes: Sequence[float], confidence: float) -> Worth:
    """Count over the samples of a test; `slopes` are the premiums, in the order of `power` and `coverage`."""
    null = test.excess(0.0)
    sign = -1.0 if slopes[-1] < 0 else 1.0
    return Worth(
        size=float(np.mean(null > 1.0)),
        power=tuple(float(np.mean(test.excess(b) > 1.0)) for b in slopes),
        coverage=tuple(float(np.mean(test.covers(b, confidence))) for b in slopes),
        nominal=smallest(test, 1.0, sign, abs(slopes[-1])),
        smallest=smallest(test, max(1.0, float(np.quantile(null, 1.0 - LEVEL))), sign, abs(slopes[-1])),
    )


def smallest(test: Tested, threshold: float, sign: float, start: float) -> float:
    """The smallest slope of a sign at which the test exceeds a threshold in 80% of samples, NaN where there is none.

    Bracketed by doubling from `start`, then halved. A test that rejects 80% of true nulls tells nothing from zero.
    """

    def power(b: float) -> float:
        return float(np.mean(test.excess(sign * b) > threshold))

    if power(0.0) >= POWER:
        return math.nan
    high = start
    for _ in range(DOUBLINGS):
        if power(high) >= POWER:
            break
        high *= 2.0
    else:
        return math.nan
    low = 0.0
    for _ in range(HALVINGS):
        middle = (low + high) / 2.0
        low, high = (low, middle) if power(middle) >= POWER else (middle, high)
    return high


def monte_carlo_error(rate: float, runs: int) -> float:
    """Standard error of a rate counted over so many samples."""
    return math.sqrt(rate * (1.0 - rate) / runs)
