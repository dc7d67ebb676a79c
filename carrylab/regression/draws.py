"""Draws under the null of no predictability, the same dates for every panel, so that any set of tests goes together."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from typing import Literal, Protocol

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.bias import PERSISTENCE_CAP
from carrylab.regression.draws_measure import (
    Design,
    Kind,
    Measures,
    Question,
    designs,
    each,
    joined,
    measure,
    one_step_of,
)
from carrylab.regression.draws_null import Fed, Null, dated_shocks, fit_null, pooled_shocks, shock_pool
from carrylab.regression.sample import Floats, Ints, take

Picks = Floats | Ints
Scheme = Literal["resampled", "wild"]
SCHEMES = {"resampled": "dates drawn with replacement", "wild": "dates in order, one random sign a date"}
CHUNK = 1 << 20  # numbers in one array of a chunk of draws: eight megabytes
FOR_PRINT = 999  # draws
FEWEST_DRAWS, MOST_DRAWS = 16, 500  # in one chunk


@dataclass(frozen=True, eq=False, slots=True)
class Case:
    """One panel and leg to draw, and the groups of its entities that are regressed, each a hypothesis of its own.

    `signal` (T, N) with NaN for holes: the sample's signal on all dates, those included whose legs are still open.
    `groups`: column numbers. `entities` (N,) are names for messages.
    """

    question: Question
    signal: Floats
    groups: tuple[Ints, ...]
    entities: tuple[str, ...]


@dataclass(frozen=True, eq=False, slots=True)
class Draws:
    """Statistics of H hypotheses, all groups of all cases in order, on the data (H,) and on B draws (B, H).

    `nulls` (H,): slopes under the null. `fitted`: the null of each different case, its entities those that have rows.
    `added`: whether any case has added predictors. `scheme` and `seed` as used.
    """

    data: Measures
    draws: Measures
    nulls: Floats
    fitted: tuple[Null, ...]
    added: bool
    scheme: Scheme
    seed: int

    @property
    def words(self) -> str:
        """How the draws were made, a sentence fragment."""
        kept = ", added predictors kept at their data" if self.added else ""
        return (
            f"{len(self.draws.slope):,} draws under the null, {SCHEMES[self.scheme]}, the same for all entities and "
            f"hypotheses, persistence estimated under the null{kept}, seed {self.seed}"
        )

    @property
    def warnings(self) -> tuple[str, ...]:
        """Sentences on what weakens the draws: persistence at its cap, few draws."""
        names = dict.fromkeys(name for null in self.fitted for name in np.array(null.names)[null.capped])
        capped = f"the persistence of {', '.join(names)} was held at {PERSISTENCE_CAP}: a trend cannot be ruled out"
        return ((capped,) if names else ()) + few_draws(len(self.draws.slope))


@dataclass(frozen=True, eq=False, slots=True)
class Prepared:
    """One case ready to draw. `shocks` (2, D, N): outcome's and signal's by row of the pool, or by calendar row.

    `data`: the statistics (H,) of its own groups on the data.
    """

    null: Null
    shocks: Floats
    designs: tuple[Design, ...]
    data: Measures


class Spread(Protocol):
    """How chunks go to workers: `map`, or the `map` of a pool of threads."""

    def __call__(
        self,
        work: Callable[[np.random.Generator, int], Kind],
        streams: Iterable[np.random.Generator],
        counts: Iterable[int],
        /,
    ) -> Iterable[Kind]:
        """Results in the order of the chunks."""


def draw(cases: Sequence[Case], count: int, *, seed: int, scheme: Scheme = "resampled", spread: Spread = map) -> Draws:
    """Statistics on `count` draws in which nothing predicts, and on the data by the same formulas.

    Each draw: shocks (e, v) of one date for every entity of every case at once, drawn with replacement or, wild, in
    order with one random sign a date; x*_{t+1} = c + phi x*_t + v* from the actual first value; leg* = (null -
    through) x* + window sums of e* and of what x* predicts of them, on the rows the data have. Added predictors keep
    their data values. One-period outcomes that the data miss are missing in the draws' 1B errors too. All cases stand
    on one calendar.
    Chunks of draws have a stream of random numbers each, so any number of workers behind `spread` gives the same bits.
    Source: Nelson and Kim (1993, JF 48:641); Goyal and Welch (2008, RFS 21:1455) for draws under the null.
    """
    dates = {len(case.question.sample.mask) for case in cases}
    if len(dates) != 1:
        raise InferenceError(f"draws taken together need one calendar, these have {sorted(dates)} dates; draw apart")
    different, order = _different(cases)
    prepared = prepare(different, scheme)
    counts = chunks(count, max(case.question.sample.mask.size for case in cases))
    streams = np.random.default_rng(seed).spawn(len(counts))
    # A resampled row is drawn from the pool; a wild one has its own.
    shape = (min(dates), prepared[0].shocks.shape[1])

    def one_chunk(stream: np.random.Generator, size: int) -> Measures:
        picks = picked(stream, (shape[0], size), shape[1], scheme)
        return joined([measured(one, picks) for one in prepared], axis=0)

    drawn = joined(list(spread(one_chunk, streams, counts)), axis=1)
    return Draws(
        data=each(joined([one.data for one in prepared], axis=0), lambda values: values[order]),
        draws=each(drawn, lambda values: values[order].T),
        nulls=np.concatenate([np.full(len(case.groups), case.question.null) for case in cases]),
        fitted=tuple(one.null for one in prepared),
        added=any(len(case.question.sample.terms) > 1 for case in cases),
        scheme=scheme,
        seed=seed,
    )


def _different(cases: Sequence[Case]) -> tuple[list[Case], Ints]:
    """The cases without those that repeat an earlier one, and where each hypothesis of all cases stands in theirs.

    Two parities of a market may be one regression under two names, as carry and the rate differential of currencies.
    """
    different: list[Case] = []
    begins, order, total = [], [], 0
    for case in cases:
        at = next((at for at, other in enumerate(different) if _same(case, other)), len(different))
        if at == len(different):
            different.append(case)
            begins.append(total)
            total += len(case.groups)
        order.append(np.arange(begins[at], begins[at] + len(case.groups)))
    return different, np.concatenate(order)


def _same(one: Case, other: Case) -> bool:
    """Whether two cases draw the same regressions from the same data."""
    ours, theirs = one.question, other.question
    asked = [(q.null, q.through, q.effects, q.sample.terms, q.sample.overlap) for q in (ours, theirs)]
    outcomes = [one_step_of(q.sample, q.leg) for q in (ours, theirs)]
    pairs = [
        (one.signal, other.signal),
        (ours.sample.x, theirs.sample.x),
        (ours.sample.y[:, :, ours.leg], theirs.sample.y[:, :, theirs.leg]),
        (ours.sample.mask, theirs.sample.mask),
        (ours.sample.steps, theirs.sample.steps),
        (outcomes[0].outcomes, outcomes[1].outcomes),
        (outcomes[0].weights, outcomes[1].weights),
        *zip(one.groups, other.groups, strict=False),
    ]
    alike = asked[0] == asked[1] and one.entities == other.entities and len(one.groups) == len(other.groups)
    return alike and all(np.array_equal(a, b, equal_nan=a.dtype == np.float64) for a, b in pairs)


def few_draws(count: int) -> tuple[str, ...]:
    """One sentence where the draws themselves leave the p-value uncertain."""
    if count >= FOR_PRINT:
        return ()
    error = (0.05 * 0.95 / count) ** 0.5
    return (f"{count} draws leave a p-value of .05 uncertain by {error:.3f}; use {FOR_PRINT} or more for print",)


def prepare(cases: Sequence[Case], scheme: Scheme) -> tuple[Prepared, ...]:
    """Fit the null of every case and lay out the shocks of all on the same dates."""
    kept = [_with_rows(case) for case in cases]
    nulls = [fit_null(case.signal, _outcomes(case), case.entities, _fed(case.question)) for case in kept]
    pool = shock_pool([null.pairs for null in nulls])
    shocks = [pooled_shocks(null, pool) if scheme == "resampled" else dated_shocks(null) for null in nulls]
    laid_out = [tuple(designs(case.question, case.groups)) for case in kept]
    data = [joined([_on_data(case, one) for one in own], axis=0) for case, own in zip(kept, laid_out, strict=True)]
    return tuple(Prepared(*parts) for parts in zip(nulls, shocks, laid_out, data, strict=True))


def chunks(count: int, size: int) -> list[int]:
    """How many draws each chunk makes, for arrays of `size` dates times entities a draw."""
    chunk = min(max(CHUNK // size, FEWEST_DRAWS), MOST_DRAWS)
    return [min(chunk, count - start) for start in range(0, count, chunk)]


def picked(stream: np.random.Generator, shape: tuple[int, int], pool: int, scheme: Scheme) -> Picks:
    """What a chunk draws (T, B): numbers of rows in the pool of `pool` dates, or a sign a date."""
    if scheme == "wild":
        return np.where(stream.integers(0, 2, shape) == 1, 1.0, -1.0)
    return stream.integers(0, pool, shape)


def simulate(one: Prepared, picks: Picks) -> tuple[Floats, Floats]:
    """Signal and one-period outcomes (T, N, B) of a chunk; the signal before an entity's first date is no value."""
    return paths(one.null, one.shocks, picks)


def paths(null: Null, shocks: Floats, picks: Picks) -> tuple[Floats, Floats]:
    """Signal and one-period outcomes (T, N, B) of a null with shocks laid out (2, D, N), as `simulate` gives them."""
    (T, B), N = picks.shape, shocks.shape[2]
    outcome, signal = np.empty((T, N, B)), np.empty((T, N, B))
    for drawn, table in zip((outcome, signal), shocks, strict=True):
        if picks.dtype == np.float64:
            np.multiply(table[:, :, None], picks[:, None], out=drawn)
        else:
            for i in range(N):
                drawn[:, i] = np.ascontiguousarray(table[:, i])[picks]
    begins = {int(row): np.flatnonzero(null.first == row) for row in np.unique(null.first)}
    moved = np.empty((N, B))
    for t in range(T):
        if t:
            signal[t] += np.multiply(null.persistence[:, None], signal[t - 1], out=moved)
        if t in begins:
            signal[t, begins[t]] = null.start[begins[t], None]
    if null.feed.any():
        outcome[1:] += null.feed[:, None] * signal[:-1] + null.level[:, None]
    signal += null.mean[:, None]
    return signal, outcome


def measured(one: Prepared, picks: Picks) -> Measures:
    """Statistics (H, B) of one case's groups on a chunk of draws."""
    signal, outcome = simulate(one, picks)
    found = []
    for design in one.designs:
        x, shocks = (np.take(values, design.columns, axis=1) for values in (signal, outcome))
        y = (design.ahead @ shocks.reshape(len(x), -1)).reshape(x.shape)
        if design.beside:
            y += design.beside * x
        found.append(measure(design, x, y, shocks))
    return joined(found, axis=0)


def _on_data(case: Case, design: Design) -> Measures:
    """The statistics of one design's groups (H,) on the data themselves."""
    question, own = case.question, design.columns
    x, y = question.sample.x[:, own, :1].copy(), question.sample.y[:, own, question.leg, None].copy()
    found = measure(design, x, y, np.nan_to_num(_outcomes(case)[:, own, None]))
    return each(found, lambda values: values[:, 0])


def _fed(question: Question) -> Fed | None:
    """How the signal predicts one-period outcomes under the null; None where it does not."""
    if not question.through:
        return None
    weights = one_step_of(question.sample, question.leg).weights[: question.sample.steps.max()]
    return Fed(question.through, weights)


def _outcomes(case: Case) -> Floats:
    return one_step_of(case.question.sample, case.question.leg).outcomes


def _with_rows(case: Case) -> Case:
    """The case without the entities that have no row in the regression."""
    kept = np.flatnonzero(case.question.sample.mask.any(axis=0))
    return Case(
        replace(case.question, sample=take(case.question.sample, kept)),
        case.signal[:, kept],
        tuple(np.searchsorted(kept, np.intersect1d(group, kept)) for group in case.groups),
        tuple(case.entities[i] for i in kept),
    )
