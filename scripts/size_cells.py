"""Every cell of the size table: its world, what is measured in it, on how many samples and with how many draws."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from functools import partial
from itertools import product
from zlib import crc32

import numpy as np
import size_measures as measures
import size_worlds
from size_measures import Measure, World

SEED = 20260101
RUNS, CURVE_PANEL_RUNS = 4000, 2000  # Monte Carlo error at 5%: .3 and .5 points; of 1,000 and 600 with draws .7, .9
DRAWN_RUNS, DRAWN_PANEL_RUNS, DRAWN_CURVE_PANEL_RUNS = 2000, 1000, 600
DRAWS, JOINT_DRAWS = 399, 999  # joint p-values rank each statistic, so few draws would tie
CURVES = {
    "1 root .98": ((0.98, 0.0045),),
    "1 root .99": ((0.99, 0.0035),),
    "2 roots .93 .99": ((0.93, 0.003), (0.99, 0.003)),
    "3 roots .7 .94 .99": ((0.7, 0.003), (0.94, 0.003), (0.99, 0.003)),
}


@dataclass(frozen=True, slots=True)
class Cell:
    """A world of one part of the table; what is measured on each of `runs` samples, with `draws` draws (0: none)."""

    part: str
    world: str
    runs: int
    draws: int
    measure: Measure

    @property
    def name(self) -> str:
        """Part and world, and whether draws are made."""
        return f"{self.part}, {self.world}{', draws' if self.draws else ''}"


def _currency_cells() -> Iterator[Cell]:
    for T in (240, 480):
        for N in (1, 10, 30):
            make = partial(size_worlds.currencies, T=T, N=N)
            for h in (1, 3, 12):
                row = f"N {N}, T {T}, h {h}"
                yield Cell("currencies", row, RUNS, 0, measures.returns_kinds(make, h, row))
                if N < 30 and h == 12:
                    yield Cell("currencies", row, DRAWN_PANEL_RUNS, DRAWS, measures.returns_draws(make, h, row))


def _equity_cells() -> Iterator[Cell]:
    for N, T, h in ((1, 480, 1), (1, 480, 12), (1, 480, 60), (15, 240, 12), (15, 480, 12)):
        for phi in (0.985, 0.995):
            row, make = f"N {N}, T {T}, h {h}, phi {phi}", partial(size_worlds.equities, T=T, N=N, phi=phi)
            yield Cell("equities", row, RUNS, 0, measures.returns_kinds(make, h, row))
            runs = DRAWN_RUNS if N == 1 else DRAWN_PANEL_RUNS
            yield Cell("equities", row, runs, DRAWS, measures.returns_draws(make, h, row))


def _bond_cells() -> Iterator[Cell]:
    for N in (1, 10):
        for roots, T in product(CURVES, (240, 480)):
            row, make = f"{roots}, N {N}, T {T}", partial(size_worlds.curves, shape=(T, N), roots=CURVES[roots])
            yield Cell("bonds", row, RUNS if N == 1 else CURVE_PANEL_RUNS, 0, measures.bond_kinds(make, row))
            runs = DRAWN_RUNS if N == 1 else DRAWN_CURVE_PANEL_RUNS
            yield Cell("bonds", row, runs, DRAWS, measures.bond_draws(make, row))


def _joint_cells() -> Iterator[Cell]:
    for T in (240, 480):
        worlds: dict[str, World] = {
            f"currencies, N {N}, T {T}": partial(size_worlds.currencies, T=T, N=N) for N in (1, 10)
        }
        worlds[f"equities, N 1, T {T}, phi 0.985"] = partial(size_worlds.equities, T=T, N=1, phi=0.985)
        for row, world in worlds.items():
            yield Cell("joint", row, RUNS, 0, measures.returns_stacked(world, row))
            yield Cell("joint", row, DRAWN_PANEL_RUNS, JOINT_DRAWS, measures.returns_joint(world, row))
        for roots in ("1 root .98", "3 roots .7 .94 .99"):
            row, make = f"bonds, {roots}, N 1, T {T}", partial(size_worlds.curves, shape=(T, 1), roots=CURVES[roots])
            yield Cell("joint", row, CURVE_PANEL_RUNS, 0, measures.bond_stacked(make, row))
            yield Cell("joint", row, DRAWN_PANEL_RUNS, JOINT_DRAWS, measures.bond_joint(make, row))


def _coverage_cells() -> Iterator[Cell]:
    for T in (240, 480):
        for N in (1, 10):
            for h in (1, 3, 12):
                row = f"N {N}, T {T}, h {h}"
                yield Cell("coverage", row, RUNS, 0, measures.coverage(T, N, h, row))


CELLS = {
    cell.name: cell
    for cell in (*_currency_cells(), *_equity_cells(), *_bond_cells(), *_joint_cells(), *_coverage_cells())
}


def counted(name: str, start: int, stop: int, draws: int) -> tuple[Counter[tuple[str, str]], Counter[tuple[str, str]]]:
    """How often each test rejects (covers) in samples `start` to `stop` of a cell, and in how many it was made.

    Each sample has a stream of random numbers of its own, so any split over workers gives the same counts.
    """
    rejected: Counter[tuple[str, str]] = Counter()
    made: Counter[tuple[str, str]] = Counter()
    for number in range(start, stop):
        stream = np.random.default_rng(np.random.SeedSequence(SEED, spawn_key=(crc32(name.encode()), number)))
        verdicts = CELLS[name].measure(stream, draws)
        rejected.update({key: int(found) for key, found in verdicts.items()})
        made.update(verdicts.keys())
    return rejected, made


def percentages(name: str, runs: int, draws: int) -> dict[tuple[str, str], float]:
    """Percent of samples in which each test rejects (covers), by row and test."""
    rejected, made = counted(name, 0, runs, draws)
    return {key: 100 * rejected[key] / made[key] for key in made}
