"""True size of every kind of error in worlds where nothing is paid, written into the contributor's guide.

`python scripts/size.py` simulates each cell, tests a true null at a nominal 5% by every kind on the same samples, and
rewrites the table between two marks in DEVELOPERS.md with date, seed and runs. `--runs`, `--draws` and `--draw-runs`
set how much is simulated; draws are made in full for every sample, as one draw a sample hides how they fail.
"""

from __future__ import annotations

import argparse
import datetime
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from environment import ROOT, prepare

if TYPE_CHECKING:
    import numpy as np

    from carrylab.regression.sample import Sample

GUIDE = ROOT / "DEVELOPERS.md"
BEGIN, END = "<!-- sizes begin -->", "<!-- sizes end -->"
SEED = 20260101
KINDS = ("one-period", "instrument", "cosine", "bartlett, fixed-b", "bartlett")
LEVEL = 0.05


@dataclass(frozen=True)
class Cell:
    """One world: its name, and what makes a sample of it from a stream of random numbers."""

    name: str
    make: Callable[[np.random.Generator], Sample]


def summed(x: np.ndarray, one: np.ndarray, h: int) -> Sample:
    """Sample of h-period sums of one-period outcomes on the signal, with entity effects in mind."""
    import numpy as np

    from carrylab.regression.sample import OneStep, make_sample

    T = len(x)
    totals = np.vstack([np.zeros((1, x.shape[1])), np.cumsum(one, axis=0)])
    y = np.full_like(one, np.nan)
    y[: T - h] = totals[h + 1 : T + 1] - totals[1 : T - h + 1]
    return make_sample(
        x[:, :, None],
        y[:, :, None],
        terms=("signal",),
        legs=("excess return",),
        steps=np.where(np.arange(T) < T - h, h, 0),
        overlap=h - 1,
        one_step=[OneStep(one, np.ones(h))],
    )


def correlated(rng: np.random.Generator, shape: tuple[int, int], across: float) -> np.ndarray:
    """Standard normal shocks (T, N), correlated across entities."""
    share = across if shape[1] > 1 else 0.0
    return share**0.5 * rng.standard_normal((shape[0], 1)) + (1 - share) ** 0.5 * rng.standard_normal(shape)


def autoregressive(shocks: np.ndarray, phi: float) -> np.ndarray:
    """Stationary first-order autoregressions (T, N) from their shocks."""
    import numpy as np

    x = np.empty_like(shocks)
    x[0] = shocks[0] / (1 - phi**2) ** 0.5
    for t in range(1, len(x)):
        x[t] = phi * x[t - 1] + shocks[t]
    return x


def currency_cell(T: int, N: int, h: int) -> Cell:
    """Persistent differentials (phi .97, shocks correlated .4) and currencies that they do not predict (.5)."""

    def make(rng: np.random.Generator) -> Sample:
        x = autoregressive(correlated(rng, (T, N), 0.4), 0.97)
        return summed(x, correlated(rng, (T, N), 0.5), h)

    return Cell(f"currencies, N {N}, T {T}, h {h}", make)


def equity_cell(T: int, N: int, h: int, phi: float) -> Cell:
    """Log dividend yields whose shocks correlate -.9 with returns, both correlated .6 across markets."""

    def make(rng: np.random.Generator) -> Sample:
        v = correlated(rng, (T, N), 0.6)
        returns = -0.9 * v + (1 - 0.81) ** 0.5 * correlated(rng, (T, N), 0.6)
        return summed(autoregressive(v, phi), returns, h)

    return Cell(f"equities, N {N}, T {T}, h {h}, phi {phi}", make)


CELLS = [
    *(currency_cell(T, N, h) for T in (240, 480) for N in (1, 10, 30) for h in (1, 3, 12)),
    equity_cell(480, 1, 1, 0.985),
    equity_cell(480, 1, 12, 0.985),
    equity_cell(480, 1, 60, 0.985),
    equity_cell(240, 15, 12, 0.985),
]
DRAWN = (
    "currencies, N 10, T 240, h 12",
    "equities, N 1, T 480, h 12, phi 0.985",
    "equities, N 15, T 240, h 12, phi 0.985",
)


def rejections(cell: Cell, runs: int, seed: int) -> dict[str, float]:
    """Share of samples in which each kind rejects the true null; clustering by entity where there are entities."""
    import numpy as np

    from carrylab.regression.covariance import ErrorOptions, standard_errors
    from carrylab.regression.fit import fit
    from carrylab.regression.law import statistics

    counts: dict[str, int] = {}
    for stream in np.random.default_rng(seed).spawn(runs):
        sample = cell.make(stream)
        estimate = fit(sample, effects="entity")
        kinds = KINDS + (("clustered: entity",) if sample.mask.shape[1] > 1 else ())
        for kind in kinds:
            found = standard_errors(sample, estimate, ErrorOptions(kind, 0 if kind.startswith("clustered") else None))
            value, error = found.estimate.coefficients[0, 0], found.std_error[0, 0]
            test = statistics(value, error, 0.0, found.df[0], 0.95, found.bandwidth[0])
            counts[kind] = counts.get(kind, 0) + int(test.p_value < LEVEL)
    return {kind: count / runs for kind, count in counts.items()}


def drawn_rejections(cell: Cell, runs: int, draws: int, seed: int) -> float:
    """Share of samples in which full draws under the null reject it."""
    import numpy as np

    from carrylab.regression.draws import Case, draw
    from carrylab.regression.draws_measure import Question
    from carrylab.regression.draws_tests import equal_tailed

    count = 0
    for number, stream in enumerate(np.random.default_rng(seed).spawn(runs)):
        sample = cell.make(stream)
        N = sample.mask.shape[1]
        signal = np.where(sample.steps[:, None] > 0, sample.x[:, :, 0], np.nan)
        case = Case(Question(sample, 0, 0.0, "entity"), signal, (np.arange(N),), tuple(f"E{i}" for i in range(N)))
        found = draw([case], draws, seed=seed + number)
        count += int(equal_tailed(found.data.one_period, found.draws.one_period)[0] < LEVEL)
    return count / runs


def table(runs: int, draws: int, draw_runs: int) -> list[str]:
    """The lines of the table, a row a cell."""
    columns = (*KINDS, "clustered: entity")
    lines = [
        f"Rejections of a true null at a nominal 5%, in percent. {datetime.date.today().isoformat()}, seed {SEED}, "
        f"{runs} samples a cell; draws: {draw_runs} samples with {draws} draws each. Monte Carlo error at 5%: "
        f"{100 * (LEVEL * (1 - LEVEL) / runs) ** 0.5:.1f} points, of the draws "
        f"{100 * (LEVEL * (1 - LEVEL) / draw_runs) ** 0.5:.1f}.",
        "",
        f"| world | {' | '.join(columns)} | draws of the one-period t |",
        f"| --- |{' --- |' * (len(columns) + 1)}",
    ]
    for cell in CELLS:
        found = rejections(cell, runs, SEED)
        shown = [f"{100 * found[kind]:.1f}" if kind in found else "" for kind in columns]
        drawn = f"{100 * drawn_rejections(cell, draw_runs, draws, SEED):.1f}" if cell.name in DRAWN else ""
        lines.append(f"| {cell.name} | {' | '.join(shown)} | {drawn} |")
        print(lines[-1], flush=True)
    return lines


def main() -> None:
    """Simulate, and rewrite the table in the guide."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--runs", type=int, default=1000)
    parser.add_argument("--draws", type=int, default=299)
    parser.add_argument("--draw-runs", type=int, default=300)
    chosen = parser.parse_args()
    text = GUIDE.read_text(encoding="utf-8")
    before, _, rest = text.partition(BEGIN)
    _, _, after = rest.partition(END)
    made = "\n".join(table(chosen.runs, chosen.draws, chosen.draw_runs))
    GUIDE.write_text(f"{before}{BEGIN}\n{made}\n{END}{after}", encoding="utf-8", newline="\n")


if __name__ == "__main__":
    python = prepare("test")
    if sys.prefix != str(python.parent.parent):
        sys.exit(subprocess.run([str(python), *sys.argv], check=False).returncode)
    main()
