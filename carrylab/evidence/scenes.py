"""Which world a regression is simulated in: whole curves, one-period outcomes, or a moving average of news."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from carrylab.data.calendar import Tenor, horizon_years, parse_tenor
from carrylab.errors import InferenceError
from carrylab.evidence.drawn_curves import DRAWN, claims_for, curves_of, has_steps, periods
from carrylab.evidence.setting import Fit
from carrylab.markets.curves import YieldCurves
from carrylab.markets.tenors import step_tenor
from carrylab.regression.draws import SCHEMES, Scheme
from carrylab.regression.draws_curve import Curves
from carrylab.regression.draws_curve_null import CurveNull, fit_curves
from carrylab.regression.draws_null import FEWEST, Null, transitions
from carrylab.regression.sample import Floats, Ints, take
from carrylab.regression.simulated import Frame, frame_of, one_leg
from carrylab.regression.simulated_curves import CurveWorld, Life, life_of
from carrylab.regression.simulated_worlds import (
    BySteps,
    OnePeriod,
    World,
    by_steps_world,
    moving_average_world,
    one_period_world,
    stand_ins,
)

SHARED = "the same for all entities and for signal and return, dates and holes as in your data"
NO_RETURN = "no leg is a return, so there is no test that nothing is paid"
BY_PERIOD = "one-period outcomes"
BY_STEP = "one-period outcomes by origin and step"
AVERAGE = (
    "the leg a moving average of news over {length} periods, as it has no one-period outcomes (a whole window's "
    "outcome and the signal's shocks over it, over the root of its length, our own construction)"
)


@dataclass(frozen=True, eq=False, slots=True)
class Scene:
    """Pooled fits that are simulated together, with a frame each; `words` say how, `said` what weakens it.

    `drawable`: whether draws under the null can be made of the data. `quick`: whether a sample takes less than a
    millisecond, as without yield curves. `kept`: columns of the pooled sample that are simulated. `null`: the signal's
    fitted persistence, None where whole curves are simulated; `roots` of these in words; `plain`: their world with
    those maturities alone that draws need.
    """

    fits: tuple[Fit, ...]
    frames: tuple[Frame, ...]
    world: World
    words: str
    said: tuple[str, ...]
    drawable: bool
    quick: bool
    kept: Ints
    null: Null | None = None
    roots: str = ""
    plain: CurveWorld | None = None


@dataclass(frozen=True, eq=False, slots=True)
class Staged:
    """The scenes of some fits, which fits are the same regression as another, and why others cannot be simulated."""

    scenes: tuple[Scene, ...]
    same: tuple[tuple[Fit, Fit], ...]
    refused: tuple[tuple[Fit, str], ...]


def stage(fits: Sequence[Fit], curves: YieldCurves | None, scheme: Scheme) -> Staged:
    """A scene for every pooled fit with a return leg; those on yield curves share one where their curves can be."""
    refused = [(fit, NO_RETURN) for fit in fits if fit.leg_of("return") is None]
    once, same = _once([fit for fit in fits if fit.leg_of("return") is not None])
    whole, why = _of_curves([fit for fit in once if fit.parity.name in DRAWN], curves)
    scenes = [] if whole is None else [whole]
    for fit in once:
        if whole is not None and fit in whole.fits:
            continue
        try:
            scenes.append(_of_signal(fit, scheme, why))
        except InferenceError as no:
            refused.append((fit, str(no)))
    gone = [fit for fit, _ in refused]
    refused += [(fit, f"the same regression as {first.parity.name}") for fit, first in same if first in gone]
    return Staged(tuple(scenes), tuple(pair for pair in same if pair[1] not in gone), tuple(refused))


def _once(fits: Sequence[Fit]) -> tuple[list[Fit], list[tuple[Fit, Fit]]]:
    """Every regression once, and the fits that are the same regression as another under its own name."""
    once: list[Fit] = []
    same: list[tuple[Fit, Fit]] = []
    for fit in fits:
        first = next((other for other in once if _is_same(fit, other)), None)
        if first is None:
            once.append(fit)
        else:
            same.append((fit, first))
    return once, same


def _is_same(fit: Fit, other: Fit) -> bool:
    """Whether two fits have the same signal, return leg, its weight and outcomes, and carry nothing over."""
    at, place = fit.leg_of("return"), other.leg_of("return")
    if at is None or place is None or any(one.leg_of("carried over") is not None for one in (fit, other)):
        return False
    legs = fit.parity.legs[at], other.parity.legs[place]
    if legs[0].weight != legs[1].weight or fit.sample.overlap != other.sample.overlap:
        return False
    outcomes = [np.zeros(0) if leg.one_step is None else leg.one_step for leg in legs]
    pairs = [
        (fit.sample.mask, other.sample.mask),
        (fit.parity_signal, other.parity_signal),
        (fit.sample.x, other.sample.x),
        (fit.sample.y[:, :, at], other.sample.y[:, :, place]),
        (outcomes[0], outcomes[1]),
    ]
    return all(np.array_equal(*pair, equal_nan=pair[0].dtype.kind == "f") for pair in pairs)


def _of_signal(fit: Fit, scheme: Scheme, why: str) -> Scene:
    """The world of the signal and its one-period outcomes, or of a moving average where there are none."""
    at = fit.leg_of("return")
    assert at is not None
    kept, short = _long(fit, at)
    frame = frame_of(take(fit.sample, kept), at, fit.estimate.effects)
    names = [fit.parity.entities[i].name for i in kept]
    signal, outcome = fit.parity_signal[:, kept], frame.sample.one_step[0]
    world: OnePeriod | BySteps
    if outcome is None:
        world = moving_average_world(frame, signal, names, scheme)
        what = AVERAGE.format(length=frame.sample.overlap + 1)
    elif outcome.outcomes.ndim == 3:
        world = by_steps_world(frame, signal, names, scheme)
        what = BY_STEP
    else:
        world = one_period_world(frame, signal, names, scheme)
        what = BY_PERIOD
    null = world.null
    words = (
        f"{what}; a first-order autoregressive signal, persistence {_span(null.persistence)}, estimated as if nothing "
        f"were paid; {SCHEMES[scheme]}, {SHARED}"
    )
    said = [*short, *_capped(null), *_no_curves(fit, why)]
    return Scene((fit,), (frame,), world, words, tuple(said), what == BY_PERIOD, what != BY_STEP, kept, null)


def _long(fit: Fit, at: int) -> tuple[Ints, list[str]]:
    """Entities with rows, those too short for a persistence of their own left out and named."""
    used = np.flatnonzero(fit.sample.mask.any(axis=0))
    own = one_leg(take(fit.sample, used), at)
    long = transitions(fit.parity_signal[:, used], stand_ins(own)).sum(axis=0) >= FEWEST
    if long.all() or not long.any():
        return used, []
    names = ", ".join(fit.parity.entities[i].name for i in used[~long])
    return used[long], [f"{names} left out, too short for a persistence of their own"]


def _capped(null: Null) -> Iterator[str]:
    names = [name for name, top in zip(null.names, null.capped, strict=True) if top]
    if names:
        yield (
            f"the persistence of {', '.join(names)} was held at {np.abs(null.persistence).max():.3f}; it comes out "
            "high where something is paid after all, and true sizes with it"
        )


def _no_curves(fit: Fit, why: str) -> Iterator[str]:
    if fit.parity.entities[0].maturity:
        reason = why if fit.parity.name in DRAWN else f"it is none of {', '.join(DRAWN)}"
        yield f"whole curves are not simulated ({reason}), so what a curve forecasts of itself is missing"


def _span(values: Floats) -> str:
    low, high = f"{values.min():.3f}", f"{values.max():.3f}"
    return low if low == high else f"{low} to {high}"


def _of_curves(fits: Sequence[Fit], curves: YieldCurves | None) -> tuple[Scene | None, str]:
    """One scene of whole curves for the bond parities whose signals and returns are sums of yields, or why none."""
    if not fits or curves is None:
        return None, ""
    step = step_tenor(fits[0].parity.calendar)
    if step is None:
        return None, "a day's yields have no maturity of one day"
    families = [(fit,) for fit in fits]
    years = horizon_years(step, fits[0].parity.calendar.interval)
    try:
        quoted = curves_of(families, curves, step, lives=True)
        world, edge = _curve_world(families, quoted, step)
        plain, _ = _curve_world(families, curves_of(families, curves, step), step)
    except InferenceError as no:
        return None, str(no)
    frames = tuple(frame_of(f.sample, f.leg_of("return") or 0, f.estimate.effects) for f in fits)
    world = replace(world, lives=tuple(_life(fit, world.maturities, years) for fit in fits))
    roots = "; ".join(
        f"{name} {', '.join(f'{root:g}' for root in own)}, {1e4 * noise:.1f} bp"
        for name, own, noise in zip(quoted.economies, world.null.roots, world.null.noise, strict=True)
    )
    words = (
        "whole curves under the expectations hypothesis, three roots an economy "
        f"({world.null.roots.min():g} to {world.null.roots.max():g}); {SCHEMES['resampled']}, the same for all "
        "economies, dates and holes as in your data; a premium is added to the return without solving the curve anew"
    )
    every = np.arange(fits[0].sample.mask.shape[1])
    scene = Scene(tuple(fits), frames, world, words, edge, not edge, False, every, roots=roots, plain=plain)
    return scene, ""


def _curve_world(families: Sequence[tuple[Fit]], quoted: Curves, step: Tenor) -> tuple[CurveWorld, tuple[str, ...]]:
    """The world of some curves, without the lives of its bonds, and what weakens it."""
    null, edge = _curve_null(quoted)
    claims = tuple(claims_for(family, quoted, step) for family in families)
    return CurveWorld(null, quoted.maturities, len(quoted.yields), claims, (None,) * len(claims)), edge


def _curve_null(quoted: Curves) -> tuple[CurveNull, tuple[str, ...]]:
    """The fitted curves; a root on the edge of the grid, which draws refuse, is kept and said."""
    parts = quoted.yields, quoted.maturities, quoted.economies
    try:
        return fit_curves(*parts), ()
    except InferenceError as no:
        said = str(no).partition(";")[0]
        return fit_curves(*parts, at_edge=True), (f"{said}; the simulated curves may lack its persistence",)


def _life(fit: Fit, maturities: Ints, years: float) -> Life | None:
    """How the bonds of a fit live while they are held, None where the data have no one-period returns."""
    if not has_steps(fit):
        return None
    long = np.array([periods(parse_tenor(e.maturity), fit) for e in fit.parity.entities], dtype=np.int64)
    holding = periods(fit.parity.horizon, fit)
    scale = np.full(len(long), years)
    if fit.parity.name == "yield-spread":
        scale /= (long - holding) * years
    return life_of(maturities, long, holding, scale)
