"""calibrate(study) -> Calibration: what a study's tests are worth on its own samples, by simulation."""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass

import pandas as pd

from carrylab.data.panel import curves
from carrylab.errors import StudyError
from carrylab.evidence.calibrated import Asked, calibration_rows, refused_row, same_rows
from carrylab.evidence.calibrated_draws import draw_rows, undrawn_rows
from carrylab.evidence.drawn import WORKERS
from carrylab.evidence.scenes import stage
from carrylab.evidence.setting import Row
from carrylab.findings import to_frame
from carrylab.markets.curves import YieldCurves
from carrylab.options import Study
from carrylab.regression.calibrated import Workers
from carrylab.report.calibration import calibration_text
from carrylab.runner import Built, Progress, build, draws_of, error_options, pooled_fit, refuse_errors

RUNS, FEWEST_RUNS, FEWEST_DRAWS, MOST = 1000, 100, 99, 10**6


@dataclass(frozen=True, eq=False, slots=True)
class Calibration:
    """What the tests of a study are worth. `findings`: rows of section `calibration`, in the columns of a run."""

    study: Study
    findings: pd.DataFrame

    def report(self, width: int = 100) -> str:
        """The whole report as plain text, `width` columns wide."""
        return calibration_text(self.findings, title=self.study.title, width=width)

    def __repr__(self) -> str:
        return self.report()


@dataclass(frozen=True, slots=True)
class Options:
    """How much is simulated: samples, draws in each of some of them (0: none), seed, and shocks resampled or wild."""

    runs: int = RUNS
    draws: int = 0
    seed: int = 7
    wild: bool = False


def calibrate(study: Study, options: Options, progress: Progress | None = None) -> Calibration:
    """Simulate the null fitted to each market's own samples, and count what every kind of error makes of them."""
    _require(options)
    say = progress or (lambda _step: None)
    built = []
    for market in study.markets:
        say(f"reading {market.name}")
        built.append(build(market, study.economies))
    refuse_errors(built)
    rows: list[Row] = []
    with workers() as spread:
        for one in built:
            rows += _market_rows(one, options, spread, say)
    return Calibration(study, to_frame(rows))


def _market_rows(built: Built, options: Options, spread: Workers, say: Progress) -> Iterator[Row]:
    """Rows of every parity and horizon of one market."""
    market, fits = built.market, [pooled_fit(parity, built) for parity in built.parities]
    staged = stage(fits, _curves(built), "wild" if options.wild else "resampled")
    for fit, why in staged.refused:
        yield refused_row(fit, why)
    draws = bool(draws_of(market.inference, [(fit,) for fit in fits]))
    asked = Asked(options.runs, options.seed, error_options(market.inference), draws)
    made: list[Row] = []
    for scene in staged.scenes:
        names = ", ".join(f"{fit.parity.name} {fit.parity.horizon}" for fit in scene.fits)
        say(f"simulating {market.name}, {names}")
        made += calibration_rows(scene, asked, spread)
        if options.draws:
            say(f"drawing in simulated samples of {market.name}, {names}")
            made += draw_rows(scene, asked, options.draws, spread)
        elif draws:
            made += undrawn_rows(scene)
    yield from made
    for fit, first in staged.same:
        yield from same_rows(fit, first, made)


def _curves(built: Built) -> YieldCurves | None:
    """The yield curves of a market of bonds."""
    if built.market.kind != "bonds":
        return None
    return YieldCurves(
        curves(built.data.tables["zero_yields"], built.data.calendar, "economy", "maturity"), built.market
    )


@contextmanager
def workers() -> Iterator[Workers]:
    """Threads for chunks of samples; a stop leaves none waiting."""
    pool = ThreadPoolExecutor(WORKERS)
    try:
        yield pool.map
    finally:
        pool.shutdown(cancel_futures=True)


def _require(options: Options) -> None:
    """Refuse numbers that cannot be counted with, one line each."""
    allowed = {"runs": (FEWEST_RUNS, MOST), "draws": (FEWEST_DRAWS, MOST), "seed": (0, 10**9)}
    for name, (low, high) in allowed.items():
        value = getattr(options, name)
        none = name == "draws" and value == 0
        if not none and not low <= value <= high:
            more = "0 for none, or " if name == "draws" else ""
            raise StudyError(f"{name} = {value} is not allowed; allowed is {more}a whole number from {low} to {high}")
