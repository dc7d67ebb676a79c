"""Draws under the null behind the return leg's test: p-values, bias-corrected slope, and what chance alone gives."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.evidence.setting import EFFECTS, Fit, Row
from carrylab.markets.parity import Leg
from carrylab.regression.draws import Case, Draws, draw
from carrylab.regression.draws_measure import Question
from carrylab.regression.draws_tests import band, bias_corrected, equal_tailed, joint, rarity, stepdown, upper_band
from carrylab.regression.sample import Floats, Ints

WORKERS = 2
BY_DRAWS = "all premium shares zero, by draws"


@dataclass(frozen=True, eq=False, slots=True)
class Drawn:
    """What the draws say of every hypothesis, all arrays (H,) or (2, H); `words` says how they were made.

    `rare`: how far out data (H,) and draws (B, H) lie, on one scale for all hypotheses.
    """

    p_value: Floats
    slope: Floats
    adjusted: Floats
    slope_band: Floats
    r2_band: Floats
    statistic: Floats
    words: str
    rare: tuple[Floats, Floats]


@dataclass(frozen=True, eq=False, slots=True)
class DrawnRows:
    """Rows from draws, the parities they stand for, and why there are none where they were refused."""

    rows: tuple[Row, ...]
    parities: frozenset[str]
    refused: str


NOTHING_DRAWN = DrawnRows((), frozenset(), "")


def drawable(fit: Fit) -> bool:
    """Whether a pooled fit has one-period outcomes that stand in their own period, so that its null can be drawn."""
    at = fit.leg_of("return")
    outcome = None if at is None else fit.sample.one_step[at]
    return outcome is not None and outcome.outcomes.ndim == 2


def drawn_rows(families: Sequence[Sequence[Fit]], count: int, seed: int) -> DrawnRows:
    """Rows for all fits of one market, drawn together: each family is a pooled fit followed by its groups.

    rank "second opinion": the return leg's slope and test with the draws' p; section "draws": the rest.
    """
    chosen = [family for family in families if drawable(family[0])]
    if not count or not chosen:
        return NOTHING_DRAWN
    try:
        with ThreadPoolExecutor(WORKERS) as pool:
            found = draw([_case(family) for family in chosen], count, seed=seed, spread=pool.map)
    except InferenceError as refused:
        return DrawnRows((), frozenset(), f"no draws under the null: {refused}")
    said = _said(found, chosen[0][0].confidence)
    place = chosen[0][0].place() | {"section": "warning"}
    warned = [place | {"term": f"draws {number}", "note": text} for number, text in enumerate(found.warnings, 1)]
    return DrawnRows((*rows_of(chosen, said), *warned), names_of(chosen), "")


def names_of(families: Sequence[Sequence[Fit]]) -> frozenset[str]:
    """The parities of some families."""
    return frozenset(family[0].parity.name for family in families)


def rows_of(families: Sequence[Sequence[Fit]], said: Drawn) -> list[Row]:
    """Rows of every fit of the families, in the order of the hypotheses that were drawn."""
    fits = [fit for family in families for fit in family]
    return [row for h, fit in enumerate(fits) for row in _rows(fit, said, h)] + list(_joint(families, said))


def _joint(families: Sequence[Sequence[Fit]], said: Drawn) -> Iterator[Row]:
    """No premium in any group of a family, at any horizon of a parity, and anywhere in the market: one p each."""
    starts = np.cumsum([0, *(len(family) for family in families)])
    market = families[0][0].place()["market"]
    place = {"section": "joint", "rank": "headline", "sample": "all", "market": market, "term": BY_DRAWS}
    for start, family in zip(starts, families, strict=False):
        kept = {name: family[0].place()[name] for name in ("parity", "horizon", "interval")}
        yield from _joint_row(place | kept | {"group": "all groups"}, range(start + 1, start + len(family)), said)
    pooled: dict[str, list[int]] = {}
    for start, family in zip(starts, families, strict=False):
        pooled.setdefault(family[0].parity.name, []).append(int(start))
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


def _case(family: Sequence[Fit]) -> Case:
    """The pooled fit as a panel to draw, its groups as the hypotheses."""
    pooled = family[0]
    at = pooled.leg_of("return")
    assert at is not None
    question = Question(pooled.sample, at, pooled.parity.legs[at].null or 0.0, pooled.estimate.effects)
    names = tuple(entity.name for entity in pooled.parity.entities)
    return Case(question, pooled.parity.signal, tuple(columns_of(pooled, fit) for fit in family), names)


def columns_of(pooled: Fit, fit: Fit) -> Ints:
    """Columns of the pooled sample that a group's fit takes."""
    if fit is pooled:
        return np.arange(pooled.sample.mask.shape[1])
    return np.array(fit.columns, dtype=np.int64)


def _said(found: Draws, confidence: float) -> Drawn:
    data, draws = found.data, found.draws
    slopes = (data.slope, draws.slope, found.nulls)
    words = f"equal-tailed p of the one-period t, {found.words}"
    return summed_up(slopes, (data.one_period, draws.one_period), draws.r2, confidence, words)


def summed_up(
    slopes: tuple[Floats, Floats, Floats], t: tuple[Floats, Floats], r2: Floats, confidence: float, words: str
) -> Drawn:
    """What draws say: `slopes` on the data (H,), on the draws (B, H) and under the null (H,); `t` on data and draws."""
    rare = rarity(*t)
    return Drawn(
        p_value=equal_tailed(*t),
        slope=bias_corrected(*slopes),
        adjusted=stepdown(*rare),
        slope_band=band(slopes[1], confidence),
        r2_band=upper_band(r2),
        statistic=t[0],
        words=words,
        rare=rare,
    )


def _rows(fit: Fit, said: Drawn, h: int) -> list[Row]:
    at = fit.leg_of("return")
    assert at is not None
    leg = fit.parity.legs[at]
    method = f"{EFFECTS[fit.estimate.effects]}; {said.words}"
    place = fit.place() | {"leg": leg.name, "role": leg.role}
    slope = float(fit.estimate.coefficients[0, at])
    test = {
        "estimate": slope,
        "std_error": float(fit.headline.std_error[0, at]),
        "statistic": float(said.statistic[h]),
        "p_value": float(said.p_value[h]),
        "null": leg.null,
    }
    lower, upper = (float(end) for end in said.slope_band[:, h])
    draws = place | {"section": "draws", "method": said.words}
    return [
        *_ranked(fit, leg, place | test | {"method": method, "r2": float(fit.estimate.r2[at])}),
        draws | test | {"term": "nothing paid"},
        draws | {"term": "bias-corrected slope", "estimate": float(said.slope[h])},
        draws | {"term": "slope by chance", "lower": lower, "upper": upper},
        draws | {"term": "R2 by chance", "estimate": float(said.r2_band[h]), "note": "95th percentile under the null"},
        draws | {"term": "stepdown", "p_value": float(said.adjusted[h]), "note": "over all hypotheses of the market"},
    ]


def _ranked(fit: Fit, leg: Leg, test: Row) -> list[Row]:
    """The draws' test as headline or second opinion of section `shares`, where the choice of errors puts it there."""
    row = test | {"section": "shares", "rank": fit.errors.draws}
    share = None if leg.weight is None else leg.weight * row["estimate"]
    why = f"; chosen because {fit.errors.why}" if fit.errors.why else ""
    paid = [row | {"term": "nothing paid", "estimate": share, "r2": None}] if share is not None else []
    if fit.errors.draws == "headline":
        return [one | {"method": one["method"] + why} for one in paid]
    return [row | {"term": "signal"}, *paid] if fit.errors.draws == "second opinion" else []
