"""Checks on single large changes: a splice, new money, a value that stands alone, or only an extreme one."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from carrylab.data.calendar import Floats
from carrylab.data.checks.finding import Check, Dense, mad, merged, span_of
from carrylab.data.checks.limits import ALONE, EXTREME, NEIGHBOURS, NEW_MONEY_BAND, QUIET, SHIFT
from carrylab.data.read import MarketData

Kind = Literal["new money", "splice", "alone", "extreme"]
TEN = math.log(10.0)


@dataclass(frozen=True, eq=False, slots=True)
class Moves:
    """Changes (T, S) of one table, and how many median absolute deviations each is from its series' median."""

    dense: Dense
    changes: Floats
    sizes: Floats


def breaks(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """D6 splice, D7 new money, D8 extremes: changes far outside the usual, told apart by what follows and by peers."""
    moves = [_moves(one) for one in tables if one.role not in ("dividends", "forwards")]
    for own in moves:
        for at in range(len(own.dense.labels)):
            large = np.flatnonzero(own.sizes[:, at] > EXTREME)
            if len(large):
                kinds = {int(t): _kind(data, moves, own, (at, int(t))) for t in large}
                yield from _single(own, at, kinds)
                yield from _extremes(own, at, kinds)
    yield from _joins(tables)


def _moves(one: Dense) -> Moves:
    changes = one.changes()
    scales = np.array([mad(column) for column in changes.T])
    middles = np.array([np.nanmedian(c) if np.isfinite(c).any() else 0.0 for c in changes.T])
    usual = np.where(scales > 0, scales, np.nan)
    return Moves(one, changes, np.abs(changes - middles) / usual)


def _kind(data: MarketData, moves: Sequence[Moves], own: Moves, where: tuple[int, int]) -> Kind:
    at, t = where
    one, jump = own.dense, float(own.changes[t, at])
    span = SHIFT[one.calendar.interval]
    if not one.is_price():
        return "alone" if _stands_alone(own.changes[:, at], own.sizes[:, at], t) else "extreme"
    if _power(jump) and _lasts(one, where, jump, (span, 1)) and _all_of_a_currency(moves, own, where):
        return "new money"
    pegged = any(peg in one.labels[at] for peg in data.market.pegs)
    shifted = _lasts(one, where, jump, (span, span)) and _beyond_neighbours(own.changes[:, at], t)
    return "splice" if shifted and not pegged and _peers_quiet(own.sizes, at, t) else "extreme"


def _power(jump: float) -> int:
    """The k of a change within 2% of k ln 10, else 0."""
    power = round(abs(jump) / TEN)
    return power if abs(abs(jump) - power * TEN) < NEW_MONEY_BAND * power * TEN else 0


def _all_of_a_currency(moves: Sequence[Moves], own: Moves, where: tuple[int, int]) -> bool:
    """Whether every price of one of the pair's currencies moves by the same power of ten in this period."""
    at, t = where
    label, power = own.dense.labels[at], _power(float(own.changes[t, at]))
    if own.dense.role != "spot" or own.dense.table.source.quote != "pair":
        return True
    for code in (label[:3], label[-3:]):
        jumps = [
            abs(_power(float(other.changes[t, n]))) if np.isfinite(other.changes[t, n]) else power
            for other in moves
            for n, name in enumerate(other.dense.labels)
            if other.dense.role == "spot" and code in name
        ]
        if all(jump == power for jump in jumps):
            return True
    return False


def _stands_alone(changes: Floats, sizes: Floats, t: int) -> bool:
    """A change far beyond the extreme that the next one mostly takes back."""
    if not sizes[t] > ALONE or t + 1 >= len(changes):
        return False
    return bool(-changes[t + 1] / changes[t] > 0.5)


def _lasts(one: Dense, where: tuple[int, int], jump: float, span: tuple[int, int]) -> bool:
    """Whether the level stays at least half the jump away for `span[0]` periods, `span[1]` of them observed."""
    at, t = where
    levels = one.logs()[:, at]
    before, after = levels[max(t - span[0], 0) : t], levels[t : t + span[0]]
    if np.isfinite(after).sum() < span[1] or not np.isfinite(before).any():
        return False
    moved = (np.nanmin(after) if jump > 0 else np.nanmax(after)) - np.nanmean(before)
    return bool(moved * np.sign(jump) > abs(jump) / 2)


def _beyond_neighbours(changes: Floats, t: int) -> bool:
    """Whether a change is extreme also beside the periods around it, so that a float after a peg is no splice."""
    usual = [mad(changes[max(t - NEIGHBOURS, 0) : t]), mad(changes[t + 1 : t + 1 + NEIGHBOURS])]
    return not any(abs(changes[t]) <= EXTREME * size for size in usual)


def _peers_quiet(sizes: Floats, at: int, t: int) -> bool:
    others = np.delete(sizes[t], at)
    known = others[np.isfinite(others)]
    return not len(known) or bool(np.quantile(known, 0.75) < QUIET)


def _single(own: Moves, at: int, kinds: dict[int, Kind]) -> Iterator[Check]:
    """A line for each change that is a splice, new money or a value that stands alone."""
    one = own.dense
    for t, kind in kinds.items():
        jump, size, rows = own.changes[t, at], own.sizes[t, at], slice(t, t + 1)
        if kind == "new money":
            factor = f"{10 ** _power(float(jump)):,}"
            advice = f"new money? divide the older values by {factor}, or the newer ones"
            yield one.found(("D7", "warning"), at, rows, (f"the price jumps by a factor of about {factor}", advice))
        elif kind == "splice":
            seen = f"one change of {jump:+.0%} in logs that lasts, {size:.0f} MAD, peers quiet"
            advice = f"another source from here? then the older values times {math.exp(jump):.4g} join it"
            yield one.found(("D6", "warning"), at, rows, (seen, advice))
        elif kind == "alone":
            seen = f"one value stands alone, {size:.0f} MAD from the one before and back again"
            advice = "a slip, or a crisis? it can make a slope on its own; nothing is deleted"
            yield one.found(("D8", "warning"), at, rows, (seen, advice))


def _extremes(own: Moves, at: int, kinds: dict[int, Kind]) -> Iterator[Check]:
    """One line on all other extreme changes of a series; the way back from one is not counted."""
    rest = [t for t, kind in kinds.items() if kind == "extreme" and kinds.get(t - 1) not in ("alone", "extreme")]
    if not rest:
        return
    rest.sort(key=lambda t: -own.sizes[t, at])
    largest = ", ".join(f"{own.sizes[t, at]:.0f} in {own.dense.label(t)}" for t in rest[:3])
    count = "1 change" if len(rest) == 1 else f"{len(rest)} changes"
    seen = f"{count} beyond {EXTREME:.0f} MAD, the largest {largest}"
    rows = slice(rest[0], rest[0] + 1)
    yield own.dense.found(("D8", "note"), at, rows, (seen, "look at it; nothing is deleted"))


def _joins(tables: Sequence[Dense]) -> Iterator[Check]:
    """D6 where one file takes over a price from another: the step between them against both files' changes."""
    prices = [one for one in tables if one.is_price()]
    for new in prices:
        for old in prices:
            if old is new or (old.role, old.table.source.quote) != (new.role, new.table.source.quote):
                continue
            for at, label in enumerate(new.labels):
                if label in old.labels:
                    yield from _join(old, new, (old.labels.index(label), at))


def _join(old: Dense, new: Dense, where: tuple[int, int]) -> Iterator[Check]:
    before, after = old.logs()[:, where[0]], new.logs()[:, where[1]]
    last, first = span_of(before).stop - 1, span_of(after).start
    if first <= last:
        return
    step = float(after[first] - before[last])
    usual = mad(np.concatenate([np.diff(before), np.diff(after)])) * math.sqrt(first - last)
    if abs(step) > EXTREME * usual:
        seen = f"a change of {step:+.0%} in logs where {new.file} takes over from {old.file}"
        advice = f"the older values times {math.exp(step):.4g} join it, if nothing else happened"
        rows = slice(first, first + 1)
        yield new.found(("D6", "warning"), where[1], rows, (seen, advice))


JUMPS = {"D6-D8": lambda data, tables: merged(breaks(data, tables))}
