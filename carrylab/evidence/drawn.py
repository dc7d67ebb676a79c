"""Draws under the null behind the return leg's test: p-values, bias-corrected slope, and what chance alone gives."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.evidence.setting import EFFECTS, Fit, Row
from carrylab.markets.parity import Leg
from carrylab.regression.draws import Case, draw
from carrylab.regression.draws_measure import Kind, Measures, Question, each, one_step_of
from carrylab.regression.draws_null import FEWEST, transitions
from carrylab.regression.draws_tests import (
    band,
    bias_corrected,
    equal_tailed,
    interval,
    joint,
    rarity,
    stepdown,
    upper_band,
)
from carrylab.regression.sample import Bools, Floats, Ints, take

WORKERS = 2
BY_DRAWS = "all premium shares zero, by draws"
ALL_PAID = "slope under which nothing comes true, the signal paid out period by period as it decays"


@dataclass(frozen=True, eq=False, slots=True)
class Drawn:
    """What the draws say of every hypothesis, all arrays (H,) or (2, H); `words` says how they were made.

    `own`: slopes on the data. `interval`: slopes that the test by the cosine t would not reject. `rare`: how far out
    data (H,) and draws (B, H) lie, on one scale for all hypotheses.
    """

    own: Floats
    p_value: Floats
    slope: Floats
    adjusted: Floats
    slope_band: Floats
    r2_band: Floats
    statistic: Floats
    interval: Floats
    words: str
    rare: tuple[Floats, Floats]


@dataclass(frozen=True, eq=False, slots=True)
class DrawnRows:
    """Rows from draws, the fits they stand for (parity, horizon and group), and why there are none where refused."""

    rows: tuple[Row, ...]
    fits: frozenset[tuple[str, str, str]]
    refused: str

    def covers(self, fit: Fit) -> bool:
        """Whether the draws stand for this fit."""
        return _key(fit) in self.fits


NOTHING_DRAWN = DrawnRows((), frozenset(), "")


@dataclass(frozen=True, eq=False, slots=True)
class Family:
    """A pooled fit followed by its groups, less the entities that cannot be drawn.

    `fits`: those with an entity left. `kept`: columns of the pooled sample. `short` names the entities left out.
    """

    fits: tuple[Fit, ...]
    kept: Ints
    short: tuple[str, ...]

    @property
    def pooled(self) -> Fit:
        """The pooled fit."""
        return self.fits[0]


def drawable(fit: Fit) -> bool:
    """Whether a pooled fit has one-period outcomes that stand in their own period, so that its null can be drawn."""
    at = fit.leg_of("return")
    outcome = None if at is None else fit.sample.one_step[at]
    return outcome is not None and outcome.outcomes.ndim == 2


def drawn_rows(families: Sequence[Sequence[Fit]], count: int, seed: int) -> DrawnRows:
    """Rows for all fits of one market, drawn together: each family is a pooled fit followed by its groups.

    rank "second opinion": the return leg's slope and test with the draws' p; section "draws": the rest. Parities of
    two legs are drawn under both their nulls on the same dates: nothing is paid, and all is paid.
    """
    chosen = [family_of(fits) for fits in families if drawable(fits[0])]
    if not count or not chosen:
        return NOTHING_DRAWN
    two_legged = [family for family in chosen if slope_of_all_paid(family.pooled) is not None]
    cases = [*(_case(family) for family in chosen), *(_case(family, all_paid=True) for family in two_legged)]
    try:
        with ThreadPoolExecutor(WORKERS) as pool:
            found = draw(cases, count, seed=seed, spread=pool.map)
    except InferenceError as refused:
        return DrawnRows((), frozenset(), f"no draws under the null: {refused}")
    first = sum(len(family.fits) for family in chosen)
    data, draws = (
        (each(part, lambda v: v[..., :first]), each(part, lambda v: v[..., first:]))
        for part in (found.data, found.draws)
    )
    words = f"equal-tailed p of the one-period t, {found.words}"
    t = (data[0].one_period, draws[0].one_period)
    said = summed_up((data[0], draws[0]), found.nulls[:first], t, chosen[0].pooled.confidence, words)
    rows = [*rows_of(chosen, said), *_all_paid(two_legged, data[1], draws[1], found.words)]
    place = chosen[0].pooled.place() | {"section": "warning"}
    warnings = (*_left_out(chosen), *found.warnings)
    warned = [place | {"term": f"draws {number}", "note": text} for number, text in enumerate(warnings, 1)]
    return DrawnRows((*rows, *warned), keys_of(chosen), "")


def family_of(fits: Sequence[Fit]) -> Family:
    """A pooled fit and its groups without the entities too short for a persistence of their own.

    A unit whose null cannot be fitted is left out of the statistic and of its law alike, so the test is one of the
    other entities; where none is long enough all stay, and the draws refuse with the name of the first.
    """
    pooled = fits[0]
    at = pooled.leg_of("return")
    assert at is not None
    outcomes = one_step_of(pooled.sample, at).outcomes
    used = pooled.sample.mask.any(axis=0)
    long: Bools = transitions(pooled.parity.signal, outcomes).sum(axis=0) >= FEWEST
    stays = (long | ~used) if (long & used).any() else np.ones_like(long)
    names = tuple(pooled.parity.entities[i].name for i in np.flatnonzero(~stays))
    kept = tuple(fit for fit in fits if stays[columns_of(pooled, fit)].any())
    return Family(kept, np.flatnonzero(stays), names)


def every_entity(fits: Sequence[Fit]) -> Family:
    """A pooled fit and its groups with all their entities."""
    return Family(tuple(fits), columns_of(fits[0], fits[0]), ())


def keys_of(families: Sequence[Family]) -> frozenset[tuple[str, str, str]]:
    """What names the fits of some families."""
    return frozenset(_key(fit) for family in families for fit in family.fits)


def slope_of_all_paid(fit: Fit) -> float | None:
    """The return leg's slope when the other leg has none; None where there is more than one other leg."""
    legs = fit.parity.legs
    if len(legs) != 2 or not fit.has_identity or fit.leg_of("fundamental") is None:
        return None
    return 1.0 / float(fit.weights[fit.leg_of("return") or 0])


def rows_of(families: Sequence[Family], said: Drawn) -> list[Row]:
    """Rows of every fit of the families, in the order of the hypotheses that were drawn."""
    named = [(fit, _without(family, fit)) for family in families for fit in family.fits]
    rows = [_noted(row, note) for h, (fit, note) in enumerate(named) for row in _rows(fit, said, h)]
    return [*rows, *_joint(families, said)]


def _joint(families: Sequence[Family], said: Drawn) -> Iterator[Row]:
    """No premium in any group of a family, at any horizon of a parity, and anywhere in the market: one p each."""
    starts = np.cumsum([0, *(len(family.fits) for family in families)])
    market = families[0].pooled.place()["market"]
    place = {"section": "joint", "rank": "headline", "sample": "all", "market": market, "term": BY_DRAWS}
    for start, family in zip(starts, families, strict=False):
        kept = {name: family.pooled.place()[name] for name in ("parity", "horizon", "interval")}
        yield from _joint_row(place | kept | {"group": "all groups"}, range(start + 1, start + len(family.fits)), said)
    pooled: dict[str, list[int]] = {}
    for start, family in zip(starts, families, strict=False):
        pooled.setdefault(family.pooled.parity.name, []).append(int(start))
    for parity, chosen in pooled.items():
        yield from _joint_row(place | {"parity": parity, "group": "all horizons"}, chosen, said)
    yield from _joint_row(place | {"group": "all of the market"}, range(int(starts[-1])), said)


def _joint_row(place: Row, chosen: Sequence[int], said: Drawn) -> Iterator[Row]:
    if len(chosen) > 1:
        data, draws = said.rare
        p_value = joint(data[list(chosen)], draws[:, list(chosen)])
        yield place | {
            "estimate": float(len(chosen)),
            "p_value": p_value,
            "method": f"draws: the rarest of them, {said.words}",
        }


def _key(fit: Fit) -> tuple[str, str, str]:
    return fit.parity.name, str(fit.parity.horizon), fit.group


def _without(family: Family, fit: Fit) -> str:
    """A note on the entities of this fit that were left out."""
    own = {family.pooled.parity.entities[i].name for i in columns_of(family.pooled, fit)}
    out = [name for name in family.short if name in own]
    return f"without {', '.join(out)}" if out else ""


def _noted(row: Row, note: str) -> Row:
    return row | {"note": "; ".join(text for text in (row.get("note", ""), note) if text)}


def _left_out(families: Sequence[Family]) -> list[str]:
    """One sentence on the entities that were left out of the draws."""
    names = dict.fromkeys(name for family in families for name in family.short)
    if not names:
        return []
    return [
        f"{', '.join(names)} left out of the draws, with fewer than {FEWEST} dates on which the signal, the one before "
        "it and the one-period outcome stand: too few for a persistence; their tests are of the other entities"
    ]


def _case(family: Family, *, all_paid: bool = False) -> Case:
    """The pooled fit as a panel to draw, its groups as the hypotheses."""
    pooled, kept = family.pooled, family.kept
    at = pooled.leg_of("return")
    assert at is not None
    null = pooled.parity.legs[at].null or 0.0
    imposed = slope_of_all_paid(pooled) if all_paid else None
    slope, through = (null, 0.0) if imposed is None else (imposed, imposed - null)
    question = Question(take(pooled.sample, kept), at, slope, pooled.estimate.effects, through)
    names = tuple(pooled.parity.entities[i].name for i in kept)
    groups = tuple(np.searchsorted(kept, np.intersect1d(columns_of(pooled, fit), kept)) for fit in family.fits)
    return Case(question, pooled.parity.signal[:, kept], groups, names)


def columns_of(pooled: Fit, fit: Fit) -> Ints:
    """Columns of the pooled sample that a group's fit takes."""
    if fit is pooled:
        return np.arange(pooled.sample.mask.shape[1])
    return np.array(fit.columns, dtype=np.int64)


def summed_up(pair: tuple[Kind, Kind], nulls: Floats, t: tuple[Floats, Floats], confidence: float, words: str) -> Drawn:
    """What draws say: measures on the data (H,) and on the draws (B, H), slopes under the null, `t` tested on both."""
    data, draws = pair
    rare = rarity(*t)
    return Drawn(
        own=data.slope,
        p_value=equal_tailed(*t),
        slope=bias_corrected(data.slope, draws.slope, nulls),
        adjusted=stepdown(*rare),
        slope_band=band(draws.slope, confidence),
        r2_band=upper_band(draws.r2),
        statistic=t[0],
        interval=interval(data.slope, data.cosine, draws.cosine, null=nulls, confidence=confidence),
        words=words,
        rare=rare,
    )


def _all_paid(families: Sequence[Family], data: Measures, draws: Measures, words: str) -> Iterator[Row]:
    """The test that all is paid, the fundamental share zero, on draws in which it is."""
    fits = [(family, fit) for family in families for fit in family.fits]
    p_values = equal_tailed(data.cosine, draws.cosine)
    for h, (family, fit) in enumerate(fits):
        weight = float(fit.weights[fit.leg_of("return") or 0])
        row = {
            "section": "draws",
            "term": "all paid",
            "estimate": 1.0 - weight * float(data.slope[h]),
            "statistic": float(data.cosine[h]),
            "p_value": float(p_values[h]),
            "null": 0.0,
            "method": f"equal-tailed p of the cosine t of the return leg, {ALL_PAID}; {words}",
        }
        yield _noted(fit.place() | row, _without(family, fit))


def _rows(fit: Fit, said: Drawn, h: int) -> list[Row]:
    at = fit.leg_of("return")
    assert at is not None
    leg = fit.parity.legs[at]
    method = f"{EFFECTS[fit.estimate.effects]}; {said.words}"
    place = fit.place() | {"leg": leg.name, "role": leg.role}
    slope = float(said.own[h])
    test = {
        "estimate": slope,
        "std_error": float(fit.headline.std_error[0, at]),
        "statistic": float(said.statistic[h]),
        "p_value": float(said.p_value[h]),
        "null": leg.null,
    }
    draws = place | {"section": "draws", "method": said.words}
    return [
        *_ranked(fit, leg, place | test | {"method": method, "r2": float(fit.estimate.r2[at])}),
        draws | test | {"term": "nothing paid"},
        draws | {"term": "bias-corrected slope", "estimate": float(said.slope[h])},
        draws
        | {"term": "slope by chance", "lower": float(said.slope_band[0, h]), "upper": float(said.slope_band[1, h])},
        draws | _inverted(slope, said.interval[:, h]),
        draws | {"term": "R2 by chance", "estimate": float(said.r2_band[h]), "note": "95th percentile under the null"},
        draws | {"term": "stepdown", "p_value": float(said.adjusted[h]), "note": "over all hypotheses of the market"},
    ]


def _inverted(slope: float, ends: Floats) -> Row:
    note = "slopes that the equal-tailed test by the cosine t would not reject"
    return {
        "term": "slope by inversion",
        "estimate": slope,
        "lower": float(ends[0]),
        "upper": float(ends[1]),
        "note": note,
    }


def _ranked(fit: Fit, leg: Leg, test: Row) -> list[Row]:
    """The draws' test as headline or second opinion of section `shares`, where the choice of errors puts it there."""
    row = test | {"section": "shares", "rank": fit.errors.draws}
    share = None if leg.weight is None else leg.weight * row["estimate"]
    why = f"; chosen because {fit.errors.why}" if fit.errors.why else ""
    paid = [row | {"term": "nothing paid", "estimate": share, "r2": None}] if share is not None else []
    if fit.errors.draws == "headline":
        return [one | {"method": one["method"] + why} for one in paid]
    return [row | {"term": "signal"}, *paid] if fit.errors.draws == "second opinion" else []
