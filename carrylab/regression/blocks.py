"""Blocks of dates drawn with replacement: regressions on per-date moments, the same dates for every sample."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.batch import bartlett, running
from carrylab.regression.block_moments import (
    PanelMoments,
    Solved,
    influence_weights,
    panel_moments,
    slopes_of,
    solved,
    summed,
)
from carrylab.regression.effects import Effects
from carrylab.regression.sample import Floats, Ints, Sample

CHUNK = 1_000  # draws whose sums are taken at once
SCORED = 1 << 19  # numbers in the scores of one chunk: four megabytes


@dataclass(frozen=True, eq=False, slots=True)
class DateBlocks:
    """Blocks of neighbouring dates: a draw is its blocks one after the other, cut to the length of the span.

    `starts` (B, m): rows of the span, counted from its first, at which the blocks of each draw begin. `length`: dates
    in a block. `first` row of the calendar that may be drawn, and how many `dates` from there on. `seed` as used.
    """

    starts: Ints
    length: int
    first: int
    dates: int
    seed: int

    @property
    def span(self) -> slice:
        """Rows of the calendar that may be drawn."""
        return slice(self.first, self.first + self.dates)

    @property
    def last(self) -> int:
        """Dates in the last block."""
        return self.dates - self.length * (int(self.starts.shape[1]) - 1)

    def rows(self) -> Ints:
        """Drawn rows of the span, in their new order (B, dates)."""
        whole = self.starts[:, :, None] + np.arange(self.length)
        rows: Ints = whole.reshape(len(whole), -1)[:, : self.dates]
        return rows

    def ends(self) -> Ints:
        """Rows of the span just after each block (B, m)."""
        ends = self.starts + self.length
        ends[:, -1] = self.starts[:, -1] + self.last
        return ends

    def in_order(self) -> Ints:
        """Starts (1, m) of the draw that is the data themselves."""
        return (np.arange(self.starts.shape[1]) * self.length)[None]

    def expected(self) -> Floats:
        """How often each date of the span is drawn on average (dates,): less at either end than between."""
        places = self.dates - self.length + 1
        whole = np.convolve(np.ones(places), np.ones(self.length)) / places
        cut = np.append(np.convolve(np.ones(places), np.ones(self.last)), np.zeros(self.length - self.last)) / places
        counts: Floats = (self.starts.shape[1] - 1) * whole + cut
        return counts

    @property
    def words(self) -> str:
        """How the dates were drawn, a sentence fragment."""
        return (
            f"{len(self.starts):,} draws of blocks of {self.length} dates, the same for all entities and legs, "
            f"seed {self.seed}"
        )


@dataclass(frozen=True, eq=False, slots=True)
class BlockDraws:
    """Slopes of K terms and L legs on the data and on B draws of dates, each with its own Driscoll-Kraay error.

    `slope` and `std_error` (K, L) on the data; `slopes` and `std_errors` (B, K, L). `centre` (K, L): slopes when each
    date counts as often as it is drawn on average, which is what the drawn slopes scatter around.
    """

    slope: Floats
    std_error: Floats
    centre: Floats
    slopes: Floats
    std_errors: Floats

    @property
    def statistics(self) -> Floats:
        """(slope - centre) / error of every draw (B, K, L)."""
        found: Floats = (self.slopes - self.centre) / self.std_errors
        return found


class Spread(Protocol):
    """How chunks go to workers: `map`, or the `map` of a pool of threads."""

    def __call__(self, work: Callable[[DateBlocks], Floats], chunks: Iterable[DateBlocks], /) -> Iterable[Floats]:
        """Results in the order of the chunks."""


def block_length(dates: int, overlap: int) -> int:
    """Dates in a block: the cube root of all dates, and at least one whole window of the outcomes.

    The order T^(1/3) is that of Kuensch (1989, Annals of Statistics 17:1217) for variances; the floor is ours.
    """
    return min(max(math.ceil(math.cbrt(dates)), overlap + 1), dates)


def date_blocks(samples: Sequence[Sample], count: int, *, seed: int, length: int | None = None) -> DateBlocks:
    """Draw `count` times as many blocks as fill the dates on which any of the samples has rows.

    All samples stand on one calendar. Every block that lies wholly inside the span is as likely as any other.
    Source: Kuensch (1989); Liu and Singh (1992) for moving blocks.
    """
    calendars = {len(sample.mask) for sample in samples}
    if len(calendars) != 1:
        raise InferenceError(f"blocks of dates need one calendar, these samples have {sorted(calendars)} dates")
    used = np.flatnonzero(np.any([sample.mask.any(axis=1) for sample in samples], axis=0))
    first, dates = int(used[0]), int(used[-1] - used[0]) + 1
    size = block_length(dates, max(sample.overlap for sample in samples)) if length is None else length
    if not 1 <= size <= dates:
        raise InferenceError(f"blocks of {size} dates cannot be drawn from {dates}; use between 1 and {dates}")
    starts = np.random.default_rng(seed).integers(0, dates - size + 1, (count, math.ceil(dates / size)))
    return DateBlocks(starts, size, first, dates, seed)


def block_slopes(sample: Sample, blocks: DateBlocks, *, effects: Effects = "entity", spread: Spread = map) -> Floats:
    """Slopes (B, K, L) of every leg on every draw of dates, effects taken out anew in each.

    With c_t the times that date t is drawn: A b = B, A = sum_t c_t XX_t - sum_g X_g X_g' / n_g, X_g = sum_t c_t X_gt
    and n_g the rows of entity g in the draw (without effects all rows are one g), B alike. Only the sums over the
    drawn blocks change, so no row is touched again. Any number of workers behind `spread` gives the same bits.
    """
    moments = panel_moments(sample, blocks.span, effects)
    return np.concatenate(list(spread(lambda part: _slopes(moments, part), _chunked(blocks, CHUNK))))


def block_draws(
    samples: Sequence[Sample],
    blocks: DateBlocks,
    *,
    effects: Effects = "entity",
    lags: int | None = None,
    spread: Spread = map,
) -> tuple[BlockDraws, ...]:
    """Slopes and Driscoll-Kraay errors of every sample on the same draws of dates, for percentile-t and uniform bands.

    Errors are Bartlett with `lags` (each sample's own overlap by default) of the drawn dates in their drawn order,
    entity means and slopes being those of the draw: sums over windows of the scores, which are linear in
    [XX, XY, X, Y, 1], so one product with the moments gives the scores of many draws.
    Source: Driscoll and Kraay (1998, REStat 80:549); Hall and Horowitz (1996, Econometrica 64:891) for studentised
    block draws and their centring.
    """
    lagged = [sample.overlap if lags is None else lags for sample in samples]
    return tuple(_draws(one, blocks, (effects, lag), spread) for one, lag in zip(samples, lagged, strict=True))


def _errors(moments: PanelMoments, found: Solved, blocks: DateBlocks, lags: int) -> Floats:
    """Driscoll-Kraay errors (B, K L) of draws, their dates in the drawn order.

    The running totals of influence on the calendar are one product; those of a draw are the same, moved block by block.
    """
    weights, draws = influence_weights(moments, found), len(blocks.starts)
    totals = (moments.totals @ weights.reshape(len(weights), -1)).reshape(-1, weights.shape[2])
    own = np.arange(draws)[:, None]
    begins, ends = (np.take(totals, (rows * draws + own).T, axis=0) for rows in (blocks.starts, blocks.ends()))
    drawn = np.zeros((blocks.dates + 1, *begins.shape[1:]))
    np.take(totals, ((blocks.rows() + 1) * draws + own).T, axis=0, out=drawn[1:], mode="clip")
    moved = running(ends - begins)[:-1] - begins
    full = blocks.length * (len(moved) - 1)
    by_block = drawn[1 : full + 1].reshape(len(moved) - 1, blocks.length, draws, -1)
    by_block += moved[:-1, None]
    drawn[full + 1 :] += moved[-1]
    return np.sqrt(bartlett(drawn, lags))


def _slopes(moments: PanelMoments, blocks: DateBlocks) -> Floats:
    found = slopes_of(moments, summed(moments.totals, blocks.starts, blocks.length, blocks.last))
    return np.ascontiguousarray(np.moveaxis(found, 2, 0))


def _draws(sample: Sample, blocks: DateBlocks, how: tuple[Effects, int], spread: Spread) -> BlockDraws:
    effects, lags = how
    moments = panel_moments(sample, blocks.span, effects)
    shape = (-1, moments.terms, moments.legs)

    def one_chunk(part: DateBlocks) -> Floats:
        found = solved(moments, summed(moments.totals, part.starts, part.length, part.last))
        errors = _errors(moments, found, part, lags).reshape(shape)
        return np.stack([np.moveaxis(found.slopes, 2, 0), errors], axis=1)

    size = max(SCORED // (blocks.dates * moments.terms * moments.legs), 1)
    drawn = np.concatenate(list(spread(one_chunk, _chunked(blocks, size))))
    data, once = solved(moments, moments.totals[-1:].T), replace(blocks, starts=blocks.in_order())
    return BlockDraws(
        slope=data.slopes[:, :, 0],
        std_error=_errors(moments, data, once, lags).reshape(shape)[0],
        centre=slopes_of(moments, (blocks.expected() @ np.diff(moments.totals, axis=0))[:, None])[:, :, 0],
        slopes=drawn[:, 0],
        std_errors=drawn[:, 1],
    )


def _chunked(blocks: DateBlocks, size: int) -> list[DateBlocks]:
    cuts = [*range(0, len(blocks.starts), size), len(blocks.starts)]
    return [replace(blocks, starts=blocks.starts[a:b]) for a, b in itertools.pairwise(cuts)]
