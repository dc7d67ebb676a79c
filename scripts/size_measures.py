"""What one cell of the size table measures on one sample: verdicts of every test, by row of the table."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np
import size_worlds
from size_tests import Kinds, by_kind, drawn_curves, drawn_returns, each_rejects, jointly_reject, stacked

from carrylab.errors import InferenceError
from carrylab.regression.draws_curve import Curves
from carrylab.regression.sample import Sample, take

SERIES: Kinds = ("one-period", "instrument", "cosine", "bartlett, fixed-b", "bartlett")
PANEL: Kinds = (*SERIES, "clustered: entity", "clustered: date")
BONDS: Kinds = ("instrument", "one-period", "cosine", "bartlett")
COVERAGE: Kinds = ("one-period", "cosine", "instrument, cosine", "bartlett")
SLOPE = 2.0  # of currencies that are forecast: a hundredth of a month's variance
MATURITIES, MORE_MATURITIES = (2, 3, 4, 5), (2, 3, 4, 5, 6, 7, 8)
HORIZONS = (1, 2, 3, 6, 9, 12, 18)
OF_HORIZONS = {"2 horizons": (2, 5), "5 horizons": (0, 1, 2, 3, 5), "7 horizons": (0, 1, 2, 3, 4, 5, 6)}
OF_MATURITIES = {"2 maturities": (0, 3), "5 maturities": (0, 1, 2, 3, 4), "7 maturities": (0, 1, 2, 3, 4, 5, 6)}
REFUSED = "draws refused"
Verdicts = dict[tuple[str, str], bool]  # (row of the table, test): whether it rejects, or covers
Measure = Callable[[np.random.Generator, int], Verdicts]  # of a stream and the number of draws
World = Callable[[np.random.Generator], size_worlds.Returns]
CurveWorld = Callable[..., Curves]  # of a stream and the longest maturity, `years`


def returns_kinds(make: World, h: int, row: str) -> Measure:
    """Every kind of error on returns over h periods."""

    def measure(rng: np.random.Generator, _draws: int) -> Verdicts:
        world = make(rng)
        kinds = PANEL if world.x.shape[1] > 1 else SERIES
        return in_row(row, by_kind(size_worlds.held(world, h), kinds))

    return measure


def returns_draws(make: World, h: int, row: str) -> Measure:
    """Draws under the null of returns over h periods."""

    def measure(rng: np.random.Generator, draws: int) -> Verdicts:
        world = make(rng)
        found = drawn_returns([size_worlds.held(world, h)], world.x, draws, _seed(rng))
        return {(row, "draws"): bool(each_rejects(*found)[0])}

    return measure


def returns_stacked(make: World, row: str) -> Measure:
    """All slopes of several horizons zero, by stacked series under the null."""

    def measure(rng: np.random.Generator, _draws: int) -> Verdicts:
        world = make(rng)
        return stacked_sets(row, [size_worlds.held(world, h) for h in HORIZONS], OF_HORIZONS)

    return measure


def returns_joint(make: World, row: str) -> Measure:
    """All slopes of several horizons zero, by the same draws for all."""

    def measure(rng: np.random.Generator, draws: int) -> Verdicts:
        world = make(rng)
        samples = [size_worlds.held(world, h) for h in HORIZONS]
        found = jointly_reject(*drawn_returns(samples, world.x, draws, _seed(rng)), OF_HORIZONS)
        return {(f"{row}, {name}", "draws"): rejected for name, rejected in found.items()}

    return measure


def coverage(T: int, N: int, h: int, row: str) -> Measure:
    """Whether intervals cover the slope of currencies that their differentials do forecast."""

    def measure(rng: np.random.Generator, _draws: int) -> Verdicts:
        sample = size_worlds.held(size_worlds.currencies(rng, T, N, slope=SLOPE), h)
        tests = by_kind(sample, COVERAGE, slope=size_worlds.slope_over(SLOPE, h))
        return in_row(row, {test: not rejected for test, rejected in tests.items()})

    return measure


def bond_kinds(make: CurveWorld, row: str) -> Measure:
    """Every kind of error on bonds of each maturity and on all together."""

    def measure(rng: np.random.Generator, _draws: int) -> Verdicts:
        claims = size_worlds.bonds(make(rng, years=MATURITIES[-1]), MATURITIES)
        parts = [
            in_row(label, by_kind(take(claims.question.sample, claims.groups[at]), BONDS))
            for label, at in of_bonds(row).items()
        ]
        return {key: found for part in parts for key, found in part.items()}

    return measure


def bond_draws(make: CurveWorld, row: str) -> Measure:
    """Draws of whole curves behind the bonds of each maturity and all together."""

    def measure(rng: np.random.Generator, draws: int) -> Verdicts:
        curves = make(rng, years=MATURITIES[-1])

        def rejects() -> dict[str, bool]:
            found = each_rejects(*drawn_curves(curves, size_worlds.bonds(curves, MATURITIES), draws, _seed(rng)))
            return {label: bool(found[at]) for label, at in of_bonds(row).items()}

        return unless_refused(rejects, list(of_bonds(row)))

    return measure


def bond_stacked(make: CurveWorld, row: str) -> Measure:
    """All slopes of several maturities zero, by stacked series under the null."""

    def measure(rng: np.random.Generator, _draws: int) -> Verdicts:
        claims = size_worlds.bonds(make(rng, years=MORE_MATURITIES[-1]), MORE_MATURITIES)
        samples = [take(claims.question.sample, group) for group in claims.groups[:-1]]
        return stacked_sets(row, samples, OF_MATURITIES)

    return measure


def bond_joint(make: CurveWorld, row: str) -> Measure:
    """All slopes of several maturities zero, by draws of whole curves."""

    def measure(rng: np.random.Generator, draws: int) -> Verdicts:
        curves = make(rng, years=MORE_MATURITIES[-1])

        def rejects() -> dict[str, bool]:
            drawn = drawn_curves(curves, size_worlds.bonds(curves, MORE_MATURITIES), draws, _seed(rng))
            return {f"{row}, {name}": found for name, found in jointly_reject(*drawn, OF_MATURITIES).items()}

        return unless_refused(rejects, [f"{row}, {name}" for name in OF_MATURITIES])

    return measure


def in_row(row: str, tests: Mapping[str, bool]) -> Verdicts:
    """What each test says, in one row of the table."""
    return {(row, test): found for test, found in tests.items()}


def stacked_sets(row: str, samples: Sequence[Sample], sets: Mapping[str, Sequence[int]]) -> Verdicts:
    """Stacked tests of several sets of hypotheses, a row each."""
    parts = [in_row(f"{row}, {name}", stacked([samples[at] for at in columns])) for name, columns in sets.items()]
    return {key: found for part in parts for key, found in part.items()}


def unless_refused(rejects: Callable[[], dict[str, bool]], rows: Sequence[str]) -> Verdicts:
    """What draws of curves say by row, and whether they were refused, as where roots or fit cannot be trusted."""
    try:
        found = rejects()
    except InferenceError:
        return {(row, REFUSED): True for row in rows}
    return {(row, "draws"): found[row] for row in rows} | {(row, REFUSED): False for row in rows}


def of_bonds(row: str) -> dict[str, int]:
    """Rows of the table for the shortest bonds, the longest, and all together, and their place among the groups."""
    last = len(MATURITIES)
    return {f"{row}, n {MATURITIES[0]}": 0, f"{row}, n {MATURITIES[-1]}": last - 1, f"{row}, pooled": last}


def _seed(rng: np.random.Generator) -> int:
    return int(rng.integers(1 << 31))
