"""Checks on every series: keys, gaps, stale values, alignment, averages, splices, new money, extremes, survivors."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

import numpy as np

from carrylab.data.calendar import Floats, steps_in, window
from carrylab.data.checks.finding import Check, Dense, Level, mad, merged, runs
from carrylab.data.read import MarketData

LONG_GAP = 12  # periods; from here a gap is a warning
STALE = {"day": 5, "week": 4, "month": 3, "quarter": 3, "year": 3}  # unchanged periods in a row
MISALIGNED_DAYS = 5  # between the usual observation days of two series
AVERAGE_AUTOCORRELATION = 0.15  # Working (1960): changes of averages have .25
EXTREME = 8.0  # median absolute deviations
ALONE = 30.0  # median absolute deviations, out and back
SHIFT_PERIODS = 6  # a splice moves the level for at least so long
QUIET = 3.0  # median absolute deviations within which peers count as quiet
TEN = math.log(10.0)
NO_LAGS = ("classical", "robust", "clustered: entity", "clustered: date", "clustered: both")


def keys(data: MarketData, _tables: Sequence[Dense]) -> Iterator[Check]:
    """D1: the same key and value twice, dropped and counted; different values are refused on reading."""
    for table in (*(t for tables in data.tables.values() for t in tables), *data.controls):
        for row in table.ledger[table.ledger["duplicates"] > 0].itertuples():
            seen = f"{row.duplicates} repeated, same value"
            yield Check("D1", "note", str(row.file), str(row.series), "", "", seen, "dropped; remove it from the file")


def gaps(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """D2: periods missing inside a series; lags go by the calendar, so outcomes that need them are missing too."""
    for one in tables:
        stands = np.isfinite(one.values)
        for at in range(stands.shape[1]):
            here = np.flatnonzero(stands[:, at])
            if not len(here):
                continue
            inside = ~stands[here[0] : here[-1] + 1, at]
            found = runs(inside)
            if found:
                longest = max(found, key=lambda run: run.stop - run.start)
                rows = slice(here[0] + longest.start, here[0] + longest.stop)
                seen = f"{int(inside.sum())} periods missing in {len(found)} gaps, the longest shown"
                level: Level = "warning" if rows.stop - rows.start >= LONG_GAP else "note"
                yield one.found(("D2", level), at, rows, (seen, "outcomes that need them are missing; fill the source"))


def stale(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """D3: a price that does not move; silent for declared pegs."""
    pegs = data.market.pegs
    for one in tables:
        if not one.is_price():
            continue
        still = one.changes() == 0.0
        for at, label in enumerate(one.labels):
            if any(peg in label for peg in pegs):
                continue
            for run in runs(still[:, at]):
                if run.stop - run.start >= STALE[data.calendar.interval]:
                    seen = f"price unchanged for {run.stop - run.start} periods"
                    yield one.found(("D3", "warning"), at, run, (seen, "check the source; declare a peg under pegs"))


def alignment(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """D4: series observed on other days of the period than the rest, or a period late or early."""
    ages = [_ages(one) for one in tables]
    known = np.concatenate([age[np.isfinite(age)] for age in ages]) if ages else np.empty(0)
    usual = float(np.median(known)) if len(known) else 0.0
    for one, age in zip(tables, ages, strict=True):
        for at in np.flatnonzero(np.abs(age - usual) > MISALIGNED_DAYS):
            seen = f"usually observed {age[at]:.0f} days before the period's end, other series {usual:.0f}"
            rows = _span(one, int(at))
            yield one.found(("D4", "warning"), int(at), rows, (seen, "take all series on the same days"))
    yield from _shifted(tables)


def _ages(one: Dense) -> Floats:
    """Median days from observation to the period's end, series by series."""
    left = (one.calendar.days[:, None] - one.days).astype(np.float64)
    left[np.isnat(one.days)] = np.nan
    return np.array([np.nanmedian(column) if np.isfinite(column).any() else np.nan for column in left.T])


def _span(one: Dense, at: int) -> slice:
    here = np.flatnonzero(np.isfinite(one.values[:, at]))
    return slice(int(here[0]), int(here[-1]) + 1)


def _shifted(tables: Sequence[Dense]) -> Iterator[Check]:
    """A price whose changes go with its peers' (or its own index') of the period before or after."""
    prices = {one.role: one for one in tables if one.role in ("prices",)}
    for one in tables:
        if not one.is_price() or one.role == "forwards":
            continue
        changes = _oriented(one)
        own = prices.get("prices") if one.role == "total_return" else None
        for at, label in enumerate(one.labels):
            if own is not None and label in own.labels:
                peers = _oriented(own)[:, own.labels.index(label)]
            elif len(one.labels) >= 4:
                others = np.delete(changes, at, axis=1)
                enough = np.isfinite(others).sum(axis=1) >= 3
                peers = np.full(len(others), np.nan)
                peers[enough] = np.nanmean(others[enough], axis=1)
            else:
                continue
            late = _lag(changes[:, at], peers)
            if late:
                seen = f"changes go with those of its peers one period {'earlier' if late > 0 else 'later'}"
                word = "late" if late > 0 else "early"
                yield one.found(("D4", "warning"), at, _span(one, at), (seen, f"the dates look one period {word}"))


def _oriented(one: Dense) -> Floats:
    """Changes with the sign that makes most of them move with the first principal direction of the table."""
    changes = one.changes()
    filled = np.nan_to_num(changes - np.nanmean(np.where(np.isfinite(changes), changes, 0.0), axis=0))
    scale = filled.std(axis=0)
    leading = np.linalg.svd(filled / np.where(scale > 0, scale, 1.0), full_matrices=False)[2][0]
    return changes * np.where(leading < 0, -1.0, 1.0)


def _lag(own: Floats, peers: Floats) -> int:
    """+1 or -1 where the correlation is clearly largest at that lag, else 0."""
    n = int((np.isfinite(own) & np.isfinite(peers)).sum())
    if n < 24:
        return 0
    # Sizes only: the sign of a series that is out of step with its peers cannot be told from them.
    same, late, early = (
        abs(_correlation(*pair)) for pair in ((own, peers), (own[1:], peers[:-1]), (own[:-1], peers[1:]))
    )
    margin = 3.0 / math.sqrt(n)
    if late > max(same, early) + margin:
        return 1
    return -1 if early > max(same, late) + margin else 0


def _correlation(a: Floats, b: Floats) -> float:
    both = np.isfinite(a) & np.isfinite(b)
    if both.sum() < 12 or a[both].std() == 0 or b[both].std() == 0:
        return 0.0
    return float(np.corrcoef(a[both], b[both])[0, 1])


def averages(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """D5: changes that follow on from the last ones, the mark of averages, in a price declared as end of period."""
    for one in tables:
        if not one.is_price() or one.table.source.timing == "average":
            continue
        for at, column in enumerate(one.changes().T):
            n = int(np.isfinite(column).sum())
            own = _correlation(column[1:], column[:-1])
            if n >= 36 and own > max(AVERAGE_AUTOCORRELATION, 2.0 / math.sqrt(n)):
                seen = f"changes have autocorrelation {own:.2f} (averages have about .25)"
                advice = 'a monthly average? then declare timing = "average"'
                yield one.found(("D5", "warning"), at, _span(one, at), (seen, advice))


def breaks(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """D6 splice, D7 new money, D8 extremes: changes far outside the usual, told apart by what follows and by peers."""
    for one in tables:
        if one.role in ("dividends", "forwards"):
            continue
        changes = one.changes()
        scales = np.array([mad(column) for column in changes.T])
        middles = np.array([np.nanmedian(c) if np.isfinite(c).any() else 0.0 for c in changes.T])
        with np.errstate(invalid="ignore", divide="ignore"):
            sizes = np.abs(changes - middles) / scales
        for at in range(len(one.labels)):
            large = np.flatnonzero(sizes[:, at] > EXTREME) if scales[at] > 0 else np.empty(0, dtype=np.int64)
            if len(large):
                yield from _told_apart(one, at, (changes, sizes), large, data.market.pegs)


def _told_apart(
    one: Dense, at: int, moves: tuple[Floats, Floats], large: np.typing.NDArray[np.int64], pegs: Sequence[str]
) -> Iterator[Check]:
    changes, sizes = moves
    rest: list[int] = []
    last = -2
    for t in large:
        rows = slice(int(t), int(t) + 1)
        power = round(abs(changes[t, at]) / TEN)
        if one.is_price() and power and abs(abs(changes[t, at]) - power * TEN) < 0.02 * power * TEN:
            seen = f"the price jumps by a factor of about {10**power:,}"
            advice = f"new money? divide the older values by {10**power:,}, or the newer ones"
            yield one.found(("D7", "warning"), at, rows, (seen, advice))
        elif one.is_price() and _lasts(one, at, int(t), changes[t, at]) and _peers_quiet(sizes, at, int(t)):
            if not any(peg in one.labels[at] for peg in pegs):
                seen = (
                    f"one change of {changes[t, at]:+.0%} that lasts, {sizes[t, at]:.0f} times the usual, peers quiet"
                )
                yield one.found(("D6", "warning"), at, rows, (seen, "another source from here? splice by a ratio"))
        elif not one.is_price() and _stands_alone(changes[:, at], sizes[:, at], int(t)):
            seen = f"one value stands alone, {sizes[t, at]:.0f} MAD from the one before and back again"
            advice = "a slip, or a crisis? it can make a slope on its own; nothing is deleted"
            yield one.found(("D8", "warning"), at, rows, (seen, advice))
            last = t
        elif t != last + 1:
            rest.append(int(t))
            last = t
    if rest:
        rest.sort(key=lambda t: -sizes[t, at])
        largest = ", ".join(f"{sizes[t, at]:.0f} in {one.label(t)}" for t in rest[:3])
        seen = f"{len(rest)} changes beyond {EXTREME:.0f} MAD, the largest {largest}"
        yield one.found(("D8", "note"), at, slice(rest[0], rest[0] + 1), (seen, "look at it; nothing is deleted"))


def _stands_alone(changes: Floats, sizes: Floats, t: int) -> bool:
    """A change far beyond the extreme that the next one mostly takes back."""
    if not sizes[t] > ALONE or t + 1 >= len(changes):
        return False
    return bool(-changes[t + 1] / changes[t] > 0.5)


def _lasts(one: Dense, at: int, t: int, jump: float) -> bool:
    """Whether the level stays at least half the jump away for the periods after."""
    levels = np.log(one.values[:, at])
    before, after = levels[max(t - SHIFT_PERIODS, 0) : t], levels[t : t + SHIFT_PERIODS]
    if np.isfinite(after).sum() < SHIFT_PERIODS or not np.isfinite(before).any():
        return False
    moved = (np.nanmin(after) if jump > 0 else np.nanmax(after)) - np.nanmean(before)
    return bool(moved * np.sign(jump) > abs(jump) / 2)


def _peers_quiet(sizes: Floats, at: int, t: int) -> bool:
    others = np.delete(sizes[t], at)
    known = others[np.isfinite(others)]
    return not len(known) or bool(np.quantile(known, 0.75) < QUIET)


def survivors(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """S1: series that end before the others; the last return is kept, and why one left decides what it means."""
    for one in tables:
        if one.role not in ("zero_yields", "spot", "prices"):
            continue
        stands = np.isfinite(one.values)
        alive = stands[0] & stands[-1] if len(stands) else np.empty(0, dtype=bool)
        share = f"{int(alive.sum())} of {len(one.labels)} series stand all through"
        for at in range(len(one.labels)):
            here = np.flatnonzero(stands[:, at])
            if len(here) and here[-1] < len(stands) - 2:
                rows = slice(int(here[-1]), int(here[-1]) + 1)
                advice = "default, merger or a change of provider? the last return is kept"
                yield one.found(("S1", "warning"), at, rows, (f"ends before the others; {share}", advice))
            if len(here) and here[0] > 1:
                rows = slice(int(here[0]), int(here[0]) + 1)
                yield one.found(("S1", "note"), at, rows, (f"begins after the others; {share}", "nothing to do"))


def look_ahead(data: MarketData, _tables: Sequence[Dense]) -> Iterator[Check]:
    """L1: an added predictor without a publication lag counts as known on its own date."""
    for table in data.controls:
        if table.source.known_after is None:
            seen = "no known_after: its value counts as known in its own period"
            advice = 'declare the publication lag, such as known_after = "1m"'
            yield Check("L1", "note", table.source.file, table.source.role, "", "", seen, advice)


def overlap(data: MarketData, _tables: Sequence[Dense]) -> Iterator[Check]:
    """H1: outcomes overlap and the chosen errors have no lags."""
    market, chosen = data.market, data.market.inference
    if chosen.errors not in NO_LAGS or chosen.lags == 0:
        return
    longest = [h for h in market.horizons if window(data.calendar, h, market.max_gap).overlap > 0]
    if longest:
        file = next(source.file for sources in market.sources.values() for source in sources)
        steps = steps_in(longest[-1], market.interval)
        length = f"horizon {longest[-1]} spans {steps or 'several'} {market.interval}s"
        seen = f"{length} and errors = {chosen.errors!r} has no lags"
        advice = "choose auto, one-period, cosine or bartlett, or force it with lags = 0"
        first, last = data.calendar.label(0), data.calendar.label(len(data.calendar) - 1)
        yield Check("H1", "error", file, "", first, last, seen, advice)


SERIES = {
    "D1": lambda data, tables: merged(keys(data, tables)),
    "D2": lambda data, tables: merged(gaps(data, tables)),
    "D3": stale,
    "D4": alignment,
    "D5": averages,
    "D6-D8": lambda data, tables: merged(breaks(data, tables)),
    "S1": lambda data, tables: merged(survivors(data, tables)),
    "L1": look_ahead,
    "H1": overlap,
}
