"""What draws under the null are worth: a full set of draws inside every simulated sample, never one draw a sample."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from carrylab.errors import InferenceError
from carrylab.evidence.calibrated import DRAWS, PREMIUMS, Asked, place_of, premiums, ranks
from carrylab.evidence.scenes import Scene
from carrylab.evidence.setting import EFFECTS, Row
from carrylab.regression.calibrated import LEVEL, Workers, monte_carlo_error
from carrylab.regression.draws import Case, draw
from carrylab.regression.draws_curve import Curves, draw_curves
from carrylab.regression.draws_measure import Question
from carrylab.regression.draws_tests import equal_tailed
from carrylab.regression.sample import Floats
from carrylab.regression.simulated import sample_of
from carrylab.regression.simulated_curves import CurveWorld

MOST_RUNS = 200
TERMS = ("size", *(f"power, {name}" for name in PREMIUMS))
NOT_DRAWN = "draws under the null cannot be made of this sample"
NOT_ASKED = "a full set of draws in every simulated sample takes its time; ask for it, such as --draws 199"


@dataclass(frozen=True, eq=False, slots=True)
class Drawn:
    """p-values (R, F, 3) of R samples, F fits, and no, half and full premium; why other samples gave none."""

    p_value: Floats
    refused: tuple[str, ...]


def draw_rows(scene: Scene, asked: Asked, draws: int, workers: Workers) -> list[Row]:
    """Size and power of the draws' test for every fit of a scene, from at most 200 samples."""
    if not scene.drawable:
        return [place_of(fit) | {"term": f"size: {DRAWS}", "note": NOT_DRAWN} for fit in scene.fits]
    runs = min(asked.runs, MOST_RUNS)

    def one_sample(stream: np.random.Generator, number: int) -> Floats | str:
        try:
            return p_values(scene, stream, draws, asked.seed + number)
        except InferenceError as why:
            return str(why)

    made = list(workers(one_sample, np.random.default_rng(asked.seed).spawn(runs), range(runs)))
    found = [one for one in made if not isinstance(one, str)]
    values = np.array(found).reshape(len(found), len(scene.fits), len(TERMS))
    drawn = Drawn(values, tuple(one for one in made if isinstance(one, str)))
    return [row for at in range(len(scene.fits)) for row in _rows(scene, at, drawn, (asked, draws))]


def undrawn_rows(scene: Scene) -> list[Row]:
    """A row for draws that a run of the study makes, where they were not asked for here."""
    if not scene.drawable:
        return []
    return [
        place_of(fit) | {"term": f"size: {DRAWS}", "rank": ranks(fit, drawn=True).get(DRAWS, ""), "note": NOT_ASKED}
        for fit in scene.fits
    ]


def p_values(scene: Scene, stream: np.random.Generator, draws: int, seed: int) -> Floats:
    """p-values (F, 3) of a full set of draws on one simulated sample, where nothing, half and all is paid."""
    slopes = [(0.0, *premiums(scene, at).slopes) for at in range(len(scene.fits))]
    if isinstance(scene.plain, CurveWorld):
        return _of_curves(scene, scene.plain, stream, (slopes, draws, seed))
    (drawn,), (frame,), fit = scene.world.simulate(stream, 1), scene.frames, scene.fits[0]
    there = np.isfinite(fit.parity_signal[:, scene.kept])
    signal = np.where(there, drawn.signal[:, :, 0], np.nan)
    every = np.arange(signal.shape[1])
    cases = [
        Case(
            Question(sample_of(frame, drawn, 0, slope), 0, 0.0, frame.effects),
            signal,
            (every,),
            tuple(f"entity {at}" for at in every),
        )
        for slope in slopes[0]
    ]
    found = draw(cases, draws, seed=seed)
    return equal_tailed(found.data.one_period, found.draws.one_period)[None]


def _of_curves(
    scene: Scene, world: CurveWorld, stream: np.random.Generator, how: tuple[list[tuple[float, ...]], int, int]
) -> Floats:
    """The same from whole curves, all fits from one set of draws."""
    slopes, draws, seed = how
    yields = world.yields(stream, 1)
    samples = world.samples(yields)
    cases = [
        replace(claims, question=Question(sample_of(frame, drawn, 0, slope), 0, 0.0, frame.effects), groups=(every,))
        for claims, drawn, frame, own in zip(world.claims, samples, scene.frames, slopes, strict=True)
        for every in [np.arange(frame.mask.shape[1])]
        for slope in own
    ]
    quoted = Curves(yields[:, :, :, 0], world.maturities, tuple(f"economy {at}" for at in range(yields.shape[1])))
    found = draw_curves(quoted, cases, draws, seed=seed)
    return equal_tailed(found.data.cosine, found.draws.cosine).reshape(len(scene.fits), -1)


def _rows(scene: Scene, at: int, drawn: Drawn, how: tuple[Asked, int]) -> Iterator[Row]:
    fit, (asked, draws) = scene.fits[at], how
    runs = len(drawn.p_value)
    place = place_of(fit) | {
        "rank": ranks(fit, drawn=asked.draws_in_run).get(DRAWS, ""),
        "method": f"{EFFECTS[fit.estimate.effects]}; equal-tailed p of {draws:,} draws in each of {runs} samples",
        "note": f"{len(drawn.refused)} samples gave no draws: {drawn.refused[0]}" if drawn.refused else "",
    }
    if not runs:
        yield place | {"term": f"size: {DRAWS}"}
        return
    shares = (0.0, *premiums(scene, at).shares)
    for number, (term, share) in enumerate(zip(TERMS, shares, strict=True)):
        rate = float(np.mean(drawn.p_value[:, at, number] <= LEVEL))
        row = {"term": f"{term}: {DRAWS}", "estimate": rate, "std_error": monte_carlo_error(rate, runs), "share": share}
        yield place | row | ({"null": LEVEL} if term == "size" else {})
