"""Speed and memory of the routines, in one process: all legs, groups and covariances against a loop over PanelOLS.

Run `python scripts/bench_routines.py`; `bench()` gives the same numbers to other scripts.
"""

from __future__ import annotations

import sys
import time
import tracemalloc
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.fit import fit
from carrylab.regression.sample import OneStep, Sample, make_sample, take

GROUPS, PER_GROUP, DATES, OVERLAP = 4, 10, 360, 11
KINDS = ("classical", "robust", "bartlett", "clustered: entity", "clustered: date")
CONFIGS = (
    {"cov_type": "unadjusted"},
    {"cov_type": "robust"},
    {"cov_type": "kernel", "kernel": "bartlett", "bandwidth": OVERLAP},
    {"cov_type": "clustered", "cluster_entity": True},
    {"cov_type": "clustered", "cluster_time": True},
)


@dataclass(frozen=True, slots=True)
class Bench:
    """Seconds of both ways and their ratio; peak memory of each call over the bytes of the dense panel."""

    ours: float
    looped: float
    ratio: float
    panel_megabytes: float
    peaks: dict[str, float]

    def lines(self) -> list[str]:
        """One printed line a number."""
        speed = (
            f"{GROUPS + 1} samples x 2 legs x {len(KINDS)} kinds: {self.ours:.3f} s, PanelOLS loop {self.looped:.3f} s"
        )
        memory = [
            f"peak memory, {what}: {peak:.2f} x the {self.panel_megabytes:.0f} MB panel"
            for what, peak in self.peaks.items()
        ]
        return [f"{speed}, {self.ratio:.0f} times faster", *memory]


def demo_sample(dates: int, entities: int, *, controls: int = 0, one_step: bool = False) -> Sample:
    """A two-leg parity with a persistent signal, late entries and a few holes."""
    rng = np.random.default_rng(0)
    x = rng.standard_normal((dates, entities, 1 + controls))
    y = np.empty((dates, entities, 2))
    y[:, :, 0] = rng.standard_normal((dates, entities))
    y[:, :, 1] = x[:, :, 0] - y[:, :, 0]
    x[: dates // 10, : entities // 4] = np.nan
    x[rng.integers(0, dates, dates), rng.integers(0, entities, dates)] = np.nan
    steps = np.where(np.arange(dates) < dates - OVERLAP - 1, OVERLAP + 1, 0)
    y[steps == 0] = np.nan
    outcome = OneStep(rng.standard_normal((dates, entities)), np.ones(OVERLAP + 1)) if one_step else None
    return make_sample(
        x,
        y,
        terms=["signal", *(f"control {k}" for k in range(controls))],
        legs=["excess return", "rate rise"],
        steps=steps,
        overlap=OVERLAP,
        one_step=[outcome, outcome],
    )


def copied(sample: Sample) -> Sample:
    """The sample made again from its own arrays."""
    return make_sample(
        sample.x,
        sample.y,
        terms=sample.terms,
        legs=sample.legs,
        steps=sample.steps,
        overlap=sample.overlap,
        one_step=sample.one_step,
    )


def ours(samples: list[Sample]) -> int:
    """Every sample, both legs, every kind; the number of standard errors made."""
    made = 0
    for sample in samples:
        estimate = fit(sample, effects="entity")
        for kind in KINDS:
            lags = None if kind == "bartlett" else 0
            made += standard_errors(sample, estimate, ErrorOptions(kind, lags)).std_error.size
    return made


def looped(samples: list[Sample]) -> int:
    """The same by one PanelOLS a leg and kind, its data frame made once a sample."""
    import pandas as pd
    from linearmodels.panel import PanelOLS

    made = 0
    for sample in samples:
        t, i = np.nonzero(sample.mask)
        frame = pd.DataFrame({"i": i, "t": t, "x": sample.x[t, i, 0], "const": 1.0}).set_index(["i", "t"])
        for leg in range(len(sample.legs)):
            outcome = pd.DataFrame({"i": i, "t": t, "y": sample.y[t, i, leg]}).set_index(["i", "t"])
            for config in CONFIGS:
                made += len(PanelOLS(outcome["y"], frame, entity_effects=True).fit(**config).std_errors)
    return made


def timed(work: Callable[[], int], repeats: int) -> float:
    """Best wall-clock seconds of a few runs."""
    best = float("inf")
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        best = min(best, time.perf_counter() - start)
    return best


def peak_over(panel_bytes: int, work: Callable[[], object]) -> float:
    """Peak of Python's memory during `work`, the panel itself included, over the panel."""
    tracemalloc.start()
    work()
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return (panel_bytes + peak) / panel_bytes


def bench(megabytes: int = 200) -> Bench:
    """Measure speed on a demo-sized study and memory on a dense panel of so many megabytes."""
    whole = demo_sample(DATES, GROUPS * PER_GROUP)
    groups = [take(whole, np.arange(g * PER_GROUP, (g + 1) * PER_GROUP)) for g in range(GROUPS)]
    samples = [whole, *groups]
    mine, theirs = timed(lambda: ours(samples), 5), timed(lambda: looped(samples), 1)
    dates = 5000
    large = demo_sample(dates, megabytes * 1_000_000 // (8 * 4 * dates), controls=1, one_step=True)
    panel = large.x.nbytes + large.y.nbytes
    peaks = {"make_sample": peak_over(panel, lambda: copied(large))}
    peaks |= {f"fit, {e} effects": peak_over(panel, lambda e=e: fit(large, effects=e)) for e in ("entity", "both")}
    estimate = fit(large, effects="entity")
    for kind in ("bartlett", "one-period", "cosine", "clustered: both"):
        options = ErrorOptions(kind, 0 if kind.startswith("clustered") else None)
        peaks[kind] = peak_over(panel, lambda options=options: standard_errors(large, estimate, options))
    return Bench(mine, theirs, theirs / mine, panel / 1e6, peaks)


def main() -> int:
    """Print the numbers; exit code 1 where a bar is missed."""
    found = bench()
    print("\n".join(found.lines()))
    return int(found.ratio < 20 or max(found.peaks.values()) >= 3)


if __name__ == "__main__":
    sys.exit(main())
