"""Speed and memory of the routines, in one process: all legs, groups and covariances against a loop over PanelOLS."""

from __future__ import annotations

import time
import tracemalloc
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.fit import fit
from carrylab.regression.sample import OneStep, Sample, make_sample

OVERLAP = 11
KINDS = ("classical", "robust", "bartlett", "clustered: entity", "clustered: date")
CONFIGS: dict[str, dict[str, object]] = {
    "classical": {"cov_type": "unadjusted"},
    "robust": {"cov_type": "robust"},
    "bartlett": {"cov_type": "kernel", "kernel": "bartlett"},
    "clustered: entity": {"cov_type": "clustered", "cluster_entity": True},
    "clustered: date": {"cov_type": "clustered", "cluster_time": True},
}


@dataclass(frozen=True, slots=True)
class Bench:
    """Seconds of both ways and their ratio; peak memory of each call over the bytes of the dense panel."""

    samples: int
    ours: float
    looped: float
    ratio: float
    panel_megabytes: float
    peaks: dict[str, float]

    def lines(self) -> list[str]:
        """One printed line a number."""
        speed = (
            f"{self.samples} samples of the demo, all legs, {len(KINDS)} kinds: {self.ours:.3f} s, PanelOLS loop "
            f"{self.looped:.1f} s"
        )
        memory = [
            f"peak memory, {what}: {peak:.2f} x the {self.panel_megabytes:.0f} MB panel (goal 3)"
            for what, peak in self.peaks.items()
        ]
        return [f"{speed}, {self.ratio:.0f} times faster (goal 20)", *memory]


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


def kinds_of(sample: Sample) -> tuple[str, ...]:
    """The kinds a sample supports: one entity makes no clusters."""
    return tuple(kind for kind in KINDS if kind != "clustered: entity" or sample.mask.any(axis=0).sum() > 1)


def ours(samples: list[Sample]) -> int:
    """Every sample, both legs, every kind; the number of standard errors made."""
    made = 0
    for sample in samples:
        estimate = fit(sample, effects="entity")
        for kind in kinds_of(sample):
            lags = None if kind == "bartlett" else 0
            made += standard_errors(sample, estimate, ErrorOptions(kind, lags)).std_error.size
    return made


def bandwidth_of(config: dict[str, object], sample: Sample) -> dict[str, object]:
    """The kernel's bandwidth where the kind has one."""
    return {"bandwidth": sample.overlap} if "kernel" in config else {}


def looped(samples: list[Sample]) -> int:
    """The same by one PanelOLS a leg and kind, its data frame made once a sample."""
    import pandas as pd
    from linearmodels.panel import PanelOLS

    made = 0
    for sample in samples:
        t, i = np.nonzero(sample.mask)
        terms = {f"x{k}": sample.x[t, i, k] for k in range(sample.x.shape[2])}
        frame = pd.DataFrame({"i": i, "t": t, "const": 1.0} | terms).set_index(["i", "t"])
        chosen = [config | bandwidth_of(config, sample) for kind, config in CONFIGS.items() if kind in kinds_of(sample)]
        for leg in range(len(sample.legs)):
            outcome = pd.DataFrame({"i": i, "t": t, "y": sample.y[t, i, leg]}).set_index(["i", "t"])
            for config in chosen:
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


def bench(samples: list[Sample], megabytes: int = 200) -> Bench:
    """Measure speed on the given samples and memory on a dense panel of so many megabytes."""
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
    return Bench(len(samples), mine, theirs, theirs / mine, panel / 1e6, peaks)
