"""What a study's tests are worth on its own sample: rows of true size, power, smallest share and coverage."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from carrylab.evidence.scenes import Scene
from carrylab.evidence.setting import EFFECTS, Fit, Row, windows_of
from carrylab.regression.bias import LARGE_BIAS
from carrylab.regression.calibrated import (
    LEVEL,
    Automatic,
    OfKind,
    Tested,
    Workers,
    Worth,
    monte_carlo_error,
    simulate,
    worth,
)
from carrylab.regression.choice import Facts, choose
from carrylab.regression.covariance import ERRORS, LAGGED, ErrorOptions
from carrylab.regression.sample import Ints
from carrylab.regression.simulated import Frame
from carrylab.regression.simulated_errors import Offer, offer
from carrylab.regression.simulated_forms import Found, Shifted

AUTO, DRAWS = "auto", "draws"
# In the order of the report: what holds under overlap first, what ignores it last.
ORDER = (
    "one-period",
    "instrument",
    "instrument, cosine",
    "cosine",
    "bartlett, fixed-b",
    "bartlett",
    "rectangular",
    "clustered: both, lagged",
    "clustered: date",
    "clustered: entity",
    "clustered: both",
    "robust",
    "classical",
)
assert set(ORDER) == set(ERRORS)
PREMIUMS = {"half premium": 0.5, "full premium": 1.0}


@dataclass(frozen=True, slots=True)
class Premiums:
    """Half and full premium of one fit: as shares, and as slopes of the return leg; `carried` is carried over.

    Where part of a price ratio is still in the price at the horizon, a full premium is all of the rest.
    """

    shares: tuple[float, ...]
    slopes: tuple[float, ...]
    carried: float


def premiums(scene: Scene, at: int) -> Premiums:
    """Premium shares of one half and one, of what the simulated signal does not carry over to the horizon."""
    fit = scene.fits[at]
    leg = fit.leg_of("return")
    assert leg is not None
    weight = 1.0 if math.isnan(fit.weights[leg]) else float(fit.weights[leg])
    carried = _carried(scene, fit)
    shares = tuple(part * (1.0 - carried) for part in PREMIUMS.values())
    return Premiums(shares, tuple(share / weight for share in shares), carried)


def _carried(scene: Scene, fit: Fit) -> float:
    """Weight of the carried-over leg times the slope of the signal a horizon on, phi^h, pooled by variance."""
    roles = [leg.role for leg in fit.parity.legs]
    if "carried over" not in roles or scene.null is None:
        return 0.0
    steps = int(np.median(fit.sample.steps[fit.sample.mask.any(axis=1)]))
    sample, estimate = scene.frames[0].sample, scene.frames[0].estimate
    within = (sample.x[:, :, 0] - estimate.absorbed.entity[:, 0] - estimate.absorbed.date[:, :1]) * sample.mask
    squares = (within**2).sum(axis=0)
    slope = float(squares @ scene.null.persistence**steps / squares.sum())
    return float(fit.weights[roles.index("carried over")]) * slope


@dataclass(frozen=True, slots=True)
class Asked:
    """How a scene is calibrated: samples, seed, the study's errors, and whether a run of the study makes draws."""

    runs: int
    seed: int
    errors: ErrorOptions
    draws_in_run: bool


def calibration_rows(scene: Scene, asked: Asked, workers: Workers) -> list[Row]:
    """Rows of section `calibration` for every fit of a scene."""
    offers = [_offers(frame, asked.errors) for frame in scene.frames]
    found = simulate(scene.world, scene.frames, offers, asked.runs, seed=asked.seed, workers=workers)
    rows: list[Row] = []
    for at, (own, kinds) in enumerate(zip(offers, found, strict=True)):
        tests = _tests(scene.fits[at], scene.frames[at], own, kinds)
        rows += _scene_rows(scene, at, asked.runs)
        for one in own:
            if one.kind in tests:
                rows += _kind_rows(scene, at, one, (tests[one.kind], asked))
            elif one.kind != AUTO:
                rows.append(place_of(scene.fits[at]) | {"term": f"size: {one.kind}", "note": one.problem})
    return rows


def _offers(frame: Frame, options: ErrorOptions) -> list[Offer]:
    """Every kind of errors, the automatic choice first; the study's own as it stands there."""
    return [offer(frame, _own_options(kind, options, frame.sample.overlap)) for kind in (AUTO, *ORDER)]


def _own_options(kind: str, options: ErrorOptions, overlap: int) -> ErrorOptions:
    if kind == options.kind:
        return options
    longer = options.lags is not None and options.lags >= overlap and kind in LAGGED
    return ErrorOptions(kind, options.lags if longer else None)


def _tests(fit: Fit, frame: Frame, offers: Sequence[Offer], found: Mapping[str, Found]) -> dict[str, Tested]:
    tests: dict[str, Tested] = {
        one.kind: OfKind(found[one.kind], one) for one in offers if one.kind in found and one.kind != AUTO
    }
    auto = automatic(fit, frame, tests, found.get(AUTO))
    return {AUTO: auto} | tests


def automatic(fit: Fit, frame: Frame, tests: Mapping[str, Tested], shifted: Found | None) -> Automatic:
    """The test that the automatic choice takes in each sample; its interval is that of the printed slope.

    What can differ between samples is the predicted bias, large or not. Draws are not made here: where the choice
    puts them first, what stands in their place is taken.
    """
    one_period = "one-period" in tests
    facts = Facts(
        entities=frame.estimate.n_entities,
        ratio=0.0,
        windows=windows_of(frame.sample, frame.estimate),
        one_period=one_period,
        curves=len({entity.economy for entity in fit.parity.entities if entity.maturity}),
    )
    printed = "one-period" if one_period else "cosine"
    chosen = [choose(replace(facts, ratio=ratio)).test for ratio in (0.0, LARGE_BIAS)]
    picked = tuple(tests.get(kind, tests[printed]) for kind in chosen)

    def strong(b: float) -> Ints:
        if not isinstance(shifted, Shifted):
            return np.zeros(1, dtype=np.int64)
        error = np.sqrt(shifted.variance(b))
        return np.asarray(np.abs(shifted.shift.ratio(frame, b, error)) >= LARGE_BIAS, dtype=np.int64)

    return Automatic(picked, tests[printed], strong)


def place_of(fit: Fit) -> Row:
    """Where a row of section `calibration` belongs: a fit and its return leg."""
    at = fit.leg_of("return")
    assert at is not None
    leg = fit.parity.legs[at]
    return fit.place() | {"section": "calibration", "leg": leg.name, "role": leg.role, "weight": leg.weight}


def refused_row(fit: Fit, why: str) -> Row:
    """Why one fit cannot be simulated."""
    return fit.place() | {"section": "calibration", "term": "not simulated", "note": why}


def same_rows(fit: Fit, first: Fit, rows: Sequence[Row]) -> Iterator[Row]:
    """The rows of another fit again, for one that is the same regression under its own name."""
    here, there = place_of(fit), place_of(first)
    own = [row for row in rows if all(row[key] == there[key] for key in ("parity", "horizon"))]
    yield here | {"term": "same regression", "note": f"as {first.parity.name}, {first.parity.horizon}"}
    yield from (row | here for row in own)


def _scene_rows(scene: Scene, at: int, runs: int) -> Iterator[Row]:
    """How the samples were made, what weakens them, and what of the spread is carried over."""
    place, premium = place_of(scene.fits[at]), premiums(scene, at)
    yield place | {"term": "samples", "estimate": runs, "method": scene.words, "note": scene.roots}
    if premium.carried:
        note = "of the signal at the simulated persistence; a full premium is all of the rest"
        yield place | {"term": "carried over", "estimate": premium.carried, "note": note}
    for number, text in enumerate(scene.said, 1):
        yield place | {"term": f"warning {number}", "note": text}


def ranks(fit: Fit, *, drawn: bool) -> dict[str, str]:
    """The rank of each kind in a run's test that nothing is paid; `drawn`: the run makes draws of this fit."""
    at = fit.leg_of("return")
    assert at is not None
    test, second = fit.errors.test.kinds[at], fit.errors.second.kinds[at]
    if drawn and fit.errors.draws == "headline":
        return {DRAWS: "headline", test: "second opinion"}
    if drawn and fit.errors.draws == "second opinion":
        return {test: "headline", DRAWS: "second opinion"}
    return {second: "second opinion", test: "headline"}


def _kind_rows(scene: Scene, at: int, one: Offer, counted: tuple[Tested, Asked]) -> Iterator[Row]:
    """Size, power, smallest share and coverage of one kind."""
    fit, (test, asked) = scene.fits[at], counted
    premium = premiums(scene, at)
    found = worth(test, premium.slopes, fit.confidence)
    words = "what the choice takes in each sample, draws aside" if one.kind == AUTO else one.words
    place = place_of(fit) | {
        "rank": ranks(fit, drawn=scene.drawable and asked.draws_in_run).get(one.kind, ""),
        "lags": one.lags if one.kind in LAGGED else None,
        "method": f"{EFFECTS[fit.estimate.effects]}; {words}",
        "note": f"ignores an overlap of {one.ignores} periods" if one.ignores else "",
    }
    for row in worth_rows(found, premium, fit.confidence, asked.runs):
        yield place | row | {"term": f"{row['term']}: {one.kind}"}


def worth_rows(found: Worth, premium: Premiums, confidence: float, runs: int) -> Iterator[Row]:
    """The numbers of one test, with Monte Carlo errors of its rates."""

    def rate(value: float) -> Row:
        return {"estimate": value, "std_error": monte_carlo_error(value, runs)}

    yield {"term": "size", **rate(found.size), "null": LEVEL, "share": 0.0}
    for name, share, power in zip(PREMIUMS, premium.shares, found.power, strict=True):
        yield {"term": f"power, {name}", **rate(power), "share": share}
    scale = abs(premium.shares[-1] / premium.slopes[-1])
    yield {"term": "smallest share", "estimate": scale * found.smallest}
    yield {"term": "smallest share, nominal", "estimate": scale * found.nominal}
    for name, share, covered in zip(PREMIUMS, premium.shares, found.coverage, strict=True):
        yield {"term": f"coverage, {name}", **rate(covered), "null": confidence, "share": share}
