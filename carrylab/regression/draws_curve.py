"""Draws of yield curves under the expectations hypothesis: every yield rebuilt, then every signal and return."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.draws import Spread, chunks, few_draws
from carrylab.regression.draws_curve_null import CurveNull, fit_curves, state_of
from carrylab.regression.draws_measure import CurveMeasures, Group, Question, each, group_of, joined, summed, take_out
from carrylab.regression.sample import Bools, Floats, Ints, take


@dataclass(frozen=True, eq=False, slots=True)
class Curves:
    """Log zero yields (T, N, M) a year, NaN for holes, of maturities (M,) in periods, rising; names of N economies."""

    yields: Floats
    maturities: Ints
    economies: tuple[str, ...]


@dataclass(frozen=True, eq=False, slots=True)
class Claims:
    """A regression on curves: entity e of the sample is a claim on the curve of economy `economy[e]`.

    Its signal is `signal[e]` times today's yields; its return `now[e]` times today's plus `later[e]` times those
    at the end of the horizon, all (E, M). `groups`: column numbers, each a hypothesis of its own.
    """

    question: Question
    groups: tuple[Ints, ...]
    economy: Ints
    signal: Floats
    now: Floats
    later: Floats


@dataclass(frozen=True, eq=False, slots=True)
class CurveDraws:
    """Statistics of H hypotheses on the data (H,) and on B draws (B, H); the curves as fitted, and the seed."""

    data: CurveMeasures
    draws: CurveMeasures
    fitted: CurveNull
    economies: tuple[str, ...]
    seed: int

    @property
    def words(self) -> str:
        """How the draws were made, a sentence fragment that names roots and fitting error of each economy."""
        fits = "; ".join(
            f"{name} {', '.join(f'{root:g}' for root in roots)}, fitting error {1e4 * noise:.1f} bp"
            for name, roots, noise in zip(self.economies, self.fitted.roots, self.fitted.noise, strict=True)
        )
        return (
            f"{len(self.draws.slope):,} draws of whole curves under the expectations hypothesis, three roots ({fits}), "
            f"dates drawn with replacement, the same for all economies, seed {self.seed}"
        )

    @property
    def warnings(self) -> tuple[str, ...]:
        """Sentences on what weakens the draws."""
        return few_draws(len(self.draws.slope))


def forward_spot_claims(maturities: Ints, long: Ints, holding: int, years: float) -> tuple[Floats, Floats, Floats]:
    """Weights (E, M) of the forward-spot spread, and of its excess return on today's and on later yields.

    With p(n) = -n y(n): spread p_t(n-h) - p_t(n) - h y_t(h), return p_{t+h}(n-h) - p_t(n) - h y_t(h), for bonds of
    `long` (E,) periods held `holding` periods; `years` is the length of a period. Fama and Bliss (1987, AER 77:680).
    """
    place = {int(n): at for at, n in enumerate(maturities)}
    now, later = np.zeros((len(long), len(maturities))), np.zeros((len(long), len(maturities)))
    for e, n in enumerate(long):
        now[e, place[int(n)]] += n * years
        now[e, place[holding]] -= holding * years
        later[e, place[int(n) - holding]] -= (n - holding) * years
    return now + later, now, later


def draw_curves(curves: Curves, cases: Sequence[Claims], count: int, *, seed: int, spread: Spread = map) -> CurveDraws:
    """Statistics on `count` draws of the curves in which only expectations move yields, and on the data.

    Each draw: factor shocks of one date for all economies at once, factors from their actual start, every yield
    rebuilt as loadings times factors plus the fitting errors of another drawn date (normal noise for the state's own
    maturities), signals and returns rebuilt from the yields on the rows the data have. The noise enters both sides,
    as it does in data, so the null slope is not quite zero and t* is not centred: use equal-tailed p-values.
    Several economies drawn together, with roots each of its own, are our own construction.
    """
    null = fit_curves(curves.yields, curves.maturities, curves.economies)
    designs = [_design(case) for case in cases]
    counts = chunks(count, curves.yields.size)

    def one_chunk(stream: np.random.Generator, size: int) -> CurveMeasures:
        yields = simulate_curves(null, curves.maturities, (len(curves.yields), size), stream)
        return joined([_measured(case, design, yields) for case, design in zip(cases, designs, strict=True)], axis=0)

    drawn = joined(list(spread(one_chunk, np.random.default_rng(seed).spawn(len(counts)), counts)), axis=1)
    return CurveDraws(
        data=joined([_on_data(case, design) for case, design in zip(cases, designs, strict=True)], axis=0),
        draws=each(drawn, np.transpose),
        fitted=null,
        economies=curves.economies,
        seed=seed,
    )


def simulate_curves(null: CurveNull, maturities: Ints, shape: tuple[int, int], stream: np.random.Generator) -> Floats:
    """Yields less their means (T, N, M, B); rows before an economy's first date are no values."""
    (T, B), (D, N, _) = shape, null.shocks.shape
    picks = stream.integers(0, D, (T, B))
    factors = np.empty((T, N, 3, B))
    for i in range(N):
        for j in range(3):
            factors[:, i, j] = np.ascontiguousarray(null.shocks[:, i, j])[picks]
    roots = null.roots[:, :, None]
    for t in range(T):
        if t:
            factors[t] += roots * factors[t - 1]
        begins = null.first == t
        factors[t, begins] = null.start[begins, :, None]
    yields: Floats = null.loadings @ factors
    _add_errors(null, state_of(maturities), yields, stream)
    return yields


def claims_of(case: Claims, yields: Floats) -> tuple[Floats, Floats]:
    """Signal and return (T, E, B) of every claim on curves (T, N, M, B), by origin; zero where no horizon ends."""
    steps, (T, _, _, B) = case.question.sample.steps, yields.shape
    signal, held = np.zeros((T, len(case.economy), B)), np.zeros((T, len(case.economy), B))
    origins = np.flatnonzero(steps)
    ends = origins + steps[origins]
    for e, economy in enumerate(case.economy):
        for m in np.flatnonzero(case.signal[e]):
            signal[:, e] += case.signal[e, m] * yields[:, economy, m]
        for m in np.flatnonzero(case.now[e]):
            held[:, e] += case.now[e, m] * yields[:, economy, m]
        for m in np.flatnonzero(case.later[e]):
            held[origins, e] += case.later[e, m] * yields[ends, economy, m]
    return signal, held


@dataclass(frozen=True, eq=False, slots=True)
class _Design:
    """What stays the same in all draws: groups of columns, each with its own mask of effects, span and cosines."""

    masks: tuple[Bools, ...]
    groups: tuple[Group, ...]


def _design(case: Claims) -> _Design:
    sample = case.question.sample
    if len(sample.terms) > 1:
        raise InferenceError(
            f"{sample.label or 'the sample'}: draws of curves take the signal alone, here is also {sample.terms[1]!r}; "
            "choose one-period errors"
        )
    masks = tuple(np.ascontiguousarray(sample.mask[:, own]) for own in case.groups)
    return _Design(masks, tuple(group_of(case.question, take(sample, own), own) for own in case.groups))


def _add_errors(null: CurveNull, state: Ints, yields: Floats, stream: np.random.Generator) -> None:
    """Add fitting errors of one drawn date a row, and noise to the state's own maturities, in place."""
    T, N, M, B = yields.shape
    picks = stream.integers(0, len(null.errors), (T, B))
    for i in range(N):
        for m in np.setdiff1d(np.arange(M), state):
            yields[:, i, m] += np.ascontiguousarray(null.errors[:, i, m])[picks]
    for m in state:
        yields[:, :, m] += null.noise[:, None] * stream.standard_normal((T, N, B))


def _measured(case: Claims, design: _Design, yields: Floats) -> CurveMeasures:
    signal, held = claims_of(case, yields)
    return _measure(case, design, signal, held)


def _on_data(case: Claims, design: _Design) -> CurveMeasures:
    sample = case.question.sample
    found = _measure(case, design, sample.x[:, :, :1], sample.y[:, :, case.question.leg, None])
    return each(found, lambda values: values[:, 0])


def _measure(case: Claims, design: _Design, signal: Floats, held: Floats) -> CurveMeasures:
    """Slope, both t and R2 (G, B) of every group from signal and return (T, E, B)."""
    parts = []
    for mask, group in zip(design.masks, design.groups, strict=True):
        x, y = (np.take(values, group.columns, axis=1) for values in (signal, held))
        for values in (x, y):
            take_out(values, mask, case.question.effects)
        parts.append(_of_group(case.question, group, x, y))
    return CurveMeasures(*(np.stack(values) for values in zip(*parts, strict=True)))


def _of_group(question: Question, group: Group, x: Floats, y: Floats) -> tuple[Floats, ...]:
    """slope, t (cosine), t (Bartlett) and R2 (B,) from signal and return after effects (T, n, B).

    Bartlett with lag L = sum over all windows of L + 1 dates of the squared sum of scores, over L + 1, exactly.
    """
    every = np.arange(x.shape[1])
    xx, xy = summed(x * x, every), summed(x * y, every)
    total, cross, whole = xx.sum(axis=0), xy.sum(axis=0), np.einsum("tnb,tnb->b", y, y)
    slope = cross / total
    scores = xy - slope * xx
    loads = group.cosines @ scores[group.span]
    width = question.sample.overlap + 1
    ends = np.zeros((len(scores) + 2 * width - 1, scores.shape[1]))
    ends[width : width + len(scores)] = np.cumsum(scores, axis=0)
    ends[len(scores) + width :] = ends[len(scores) + width - 1]
    windows = ends[width:] - ends[:-width]
    away = cross - question.null * total
    of_cosines = np.sqrt(np.einsum("jb,jb->b", loads, loads))
    of_windows = np.sqrt(np.einsum("tb,tb->b", windows, windows) / width)
    return slope, away / of_cosines, away / of_windows, slope * cross / whole
