"""Checks on every series: repeated keys, gaps, stale values, survivors; and on what the study declares about time."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from carrylab.data.calendar import steps_in, window
from carrylab.data.checks.finding import Bools, Check, Dense, Level, merged, runs
from carrylab.data.checks.limits import LONG_GAP, STALE
from carrylab.data.read import MarketData

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
                seen = f"{int(inside.sum())} periods missing" + (
                    f" in {len(found)} gaps, the longest shown" if found[1:] else ""
                )
                level: Level = "warning" if rows.stop - rows.start >= LONG_GAP[one.calendar.interval] else "note"
                yield one.found(("D2", level), at, rows, (seen, "outcomes that need them are missing; fill the source"))


def stale(data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """D3: a price that does not move, one period sooner where its forwards do; silent for declared pegs."""
    pegs, least = data.market.pegs, STALE[data.calendar.interval]
    for one in tables:
        if not one.is_price():
            continue
        still = one.changes() == 0.0
        for at, label in enumerate(one.labels):
            if any(peg in label for peg in pegs):
                continue
            moving = _forward_moves(one, at, tables)
            found = [run for run in runs(still[:, at]) if run.stop - run.start >= least - bool(moving[run].all())]
            if found:
                longest = max(found, key=lambda run: run.stop - run.start)
                seen = f"price unchanged for {longest.stop - longest.start} periods"
                seen += " while its forwards move" if moving[longest].all() else ""
                advice = f"{len(found) - 1} more such runs; " if len(found) > 1 else ""
                advice += "check the source; declare a peg under pegs"
                yield one.found(("D3", "warning"), at, longest, (seen, advice))


def _forward_moves(one: Dense, at: int, tables: Sequence[Dense]) -> Bools:
    """Where an outright forward of the same name moves (T,); nowhere without one."""
    moves = np.zeros(len(one.values), dtype=np.bool_)
    for other in tables if one.role == "spot" else ():
        if other.role == "forwards" and other.table.source.quote == one.table.source.quote:
            own = [n for n, code in enumerate(other.codes) if code == one.labels[at]]
            moves |= (np.nan_to_num(other.changes()[:, own]) != 0.0).any(axis=1)
    return moves


def survivors(_data: MarketData, tables: Sequence[Dense]) -> Iterator[Check]:
    """S1: series that end before the others; the last return is kept, and why one left decides what it means."""
    for one in tables:
        if one.role not in ("zero_yields", "spot", "prices"):
            continue
        stands = np.isfinite(one.values)
        alive = {code for code, whole in zip(one.codes, stands[0] & stands[-1], strict=True) if whole}
        share = f"{len(alive)} of {len(set(one.codes))} stand at both ends of the sample"
        for at in range(len(one.labels)):
            rows = one.span(at)
            if rows.stop < len(stands) - 1:
                said = (
                    f"ends before the others; {share}",
                    "default, merger or a change of provider? the last return is kept",
                )
                yield one.found(("S1", "warning"), at, slice(rows.stop - 1, rows.stop), said)
            if rows.start > 1:
                said = (f"begins after the others; {share}", "nothing to do")
                yield one.found(("S1", "note"), at, slice(rows.start, rows.start + 1), said)


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
    "S1": lambda data, tables: merged(survivors(data, tables)),
    "L1": look_ahead,
    "H1": overlap,
}
