"""Draws of whole yield curves under the expectations hypothesis behind the tests of bonds."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor

import numpy as np

from carrylab.data.calendar import Tenor, horizon_years, parse_tenor, steps_in
from carrylab.errors import InferenceError
from carrylab.evidence.drawn import (
    NOTHING_DRAWN,
    WORKERS,
    Drawn,
    DrawnRows,
    columns_of,
    every_entity,
    keys_of,
    rows_of,
    summed_up,
)
from carrylab.evidence.setting import Fit
from carrylab.markets.curves import YieldCurves
from carrylab.markets.tenors import step_tenor
from carrylab.regression.draws_curve import Claims, CurveDraws, Curves, draw_curves, forward_spot_claims
from carrylab.regression.draws_measure import Question
from carrylab.regression.sample import Floats, Ints

DRAWN = ("forward-spot", "yield-spread", "carry")


def curve_rows(families: Sequence[Sequence[Fit]], curves: YieldCurves, count: int, seed: int) -> DrawnRows:
    """Rows for the bond parities of one horizon each whose signals and returns are sums of yields, drawn together."""
    chosen = [family for family in families if family[0].parity.name in DRAWN]
    step = step_tenor(chosen[0][0].parity.calendar) if chosen else None
    if not count or step is None:
        return NOTHING_DRAWN
    try:
        quoted = curves_of(chosen, curves, step)
        with ThreadPoolExecutor(WORKERS) as pool:
            cases = [claims_for(family, quoted, step) for family in chosen]
            found = draw_curves(quoted, cases, count, seed=seed, spread=pool.map)
    except InferenceError as refused:
        return DrawnRows((), frozenset(), f"no draws of yield curves: {refused}")
    said = _said(found, chosen[0][0].confidence)
    whole = [every_entity(family) for family in chosen]
    return DrawnRows(tuple(rows_of(whole, said)), keys_of(whole), "")


def periods(length: Tenor, fit: Fit) -> int:
    """A length in periods of the fit's calendar."""
    steps = steps_in(length, fit.parity.calendar.interval)
    if steps is None:
        raise InferenceError(f"{length} is no whole number of {fit.parity.calendar.interval}s")
    return steps


def curves_of(families: Sequence[Sequence[Fit]], curves: YieldCurves, step: Tenor, *, lives: bool = False) -> Curves:
    """Yields of every maturity the parities use, and the shortest quoted, for the economies in the fits.

    `lives`: also of every maturity that bonds with one-period outcomes pass through while they are held.
    """
    first = families[0][0]
    economies = tuple(dict.fromkeys(e.economy for family in families for e in family[0].parity.entities))
    wanted = {periods(curves.quoted.tenors[0], first)}
    for family in families:
        h = family[0].parity.horizon
        for entity in family[0].parity.entities:
            n = parse_tenor(entity.maturity)
            wanted |= {periods(length, first) for length in (h, n, n - h)}
            if lives and has_steps(family[0]):
                wanted |= {
                    m - gone for m in (periods(n, first), periods(h, first)) for gone in range(periods(h, first))
                }
    columns = [curves.quoted.codes.index(code) for code in economies]
    maturities = np.array(sorted(wanted), dtype=np.int64)
    yields = np.stack([curves.yields(step.times(int(n)))[:, columns] for n in maturities], axis=2)
    return Curves(yields, maturities, economies)


def has_steps(fit: Fit) -> bool:
    """Whether the return leg of a fit has one-period outcomes by origin and step."""
    at = fit.leg_of("return")
    outcome = None if at is None else fit.sample.one_step[at]
    return outcome is not None and outcome.outcomes.ndim == 3


def claims_for(family: Sequence[Fit], curves: Curves, step: Tenor) -> Claims:
    """The pooled fit as claims on curves: what its signals and returns are in yields."""
    pooled = family[0]
    at = pooled.leg_of("return")
    assert at is not None
    parity = pooled.parity
    long: Ints = np.array([periods(parse_tenor(e.maturity), pooled) for e in parity.entities], dtype=np.int64)
    holding = periods(parity.horizon, pooled)
    years = horizon_years(step, parity.calendar.interval)
    signal, now, later = forward_spot_claims(curves.maturities, long, holding, years)
    if parity.name == "yield-spread":
        left = ((long - holding) * years)[:, None]
        signal = _spread_weights(curves.maturities, long, holding)
        now, later = now / left, later / left
    question = Question(pooled.sample, at, parity.legs[at].null or 0.0, pooled.estimate.effects)
    economy: Ints = np.array([curves.economies.index(e.economy) for e in parity.entities], dtype=np.int64)
    return Claims(question, tuple(columns_of(pooled, fit) for fit in family), economy, signal, now, later)


def _spread_weights(maturities: Ints, long: Ints, holding: int) -> Floats:
    """Weights (E, M) of m/(n-m) [y(n) - y(m)] on today's yields."""
    weights = np.zeros((len(long), len(maturities)))
    for e, n in enumerate(long):
        scale = holding / (n - holding)
        weights[e, maturities == n] = scale
        weights[e, maturities == holding] = -scale
    return weights


def _said(found: CurveDraws, confidence: float) -> Drawn:
    data, draws = found.data, found.draws
    words = f"equal-tailed p of the cosine t, {found.words}"
    t = (data.cosine, draws.cosine)
    return summed_up((data, draws), np.zeros_like(data.slope), t, confidence, words)
