"""Declared files become tables: one row a series and period, everything dropped counted in a ledger."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from carrylab.data.calendar import Calendar, Interval, make_calendar, ordinal
from carrylab.data.dates import bound, read_dates
from carrylab.data.files import read_cells
from carrylab.data.ledger import Span, account
from carrylab.data.shape import find_layout, long_rows
from carrylab.errors import DataError
from carrylab.options import Market, PanelColumns, Source

CONTROL_KEYS = ("economy", "currency", "index", "entity", "maturity")


@dataclass(frozen=True, eq=False, slots=True)
class Table:
    """One source as read, raw values not yet converted.

    `keys` name the code columns. `frame` has file, row (line in the file, header 1), ordinal (period number), date
    (the last day of the period where the file gives only a period), the keys as categories (lengths in canonical form)
    and the values: `value`, or `bid` and `ask`, or the named columns of a panel. One row a series and period, sorted
    by keys and date, holes left out; a control with `known_after` keeps every date. `ledger` has one row a series:
    file, series, read, missing, duplicates, outside, superseded, used, first, last.
    """

    source: Source
    keys: tuple[str, ...]
    frame: pd.DataFrame
    ledger: pd.DataFrame


@dataclass(frozen=True, eq=False, slots=True)
class MarketData:
    """All tables of one market by role, its added predictors, and the calendar of everything observed in the tables.

    `surveys` stand in the order of the market's own.
    """

    market: Market
    tables: Mapping[str, tuple[Table, ...]]
    controls: tuple[Table, ...]
    calendar: Calendar
    surveys: tuple[Table, ...] = ()


def read_market(market: Market) -> MarketData:
    """Read every file of a market; DataError, one line, for the first thing that cannot be read as declared."""
    span = _span(market.interval, market.first, market.last)
    tables = {
        role: tuple(_table(source, span, market.panel) for source in sources)
        for role, sources in market.sources.items()
    }
    observed = np.concatenate([table.frame["ordinal"].to_numpy() for found in tables.values() for table in found])
    if not len(observed):
        raise DataError(f"market {market.name!r}: no observation lies between from and until; widen them")
    controls = tuple(_control(source, span) for source in market.controls)
    surveys = tuple(_control(survey.source, span) for survey in market.surveys)
    return MarketData(market, tables, controls, make_calendar(market.interval, observed), surveys)


def read_source(source: Source, *, interval: Interval, first: str | None, last: str | None) -> Table:
    """Read one declared file of series between two periods, both included (None: no bound)."""
    return _table(source, _span(interval, first, last), None)


def read_panel(
    source: Source, panel: PanelColumns, *, interval: Interval, first: str | None, last: str | None
) -> Table:
    """Read signals and legs already built: the panel's columns in place of `value`, each row at its origin date."""
    return _table(source, _span(interval, first, last), panel)


def read_control(source: Source, *, interval: Interval, first: str | None, last: str | None) -> Table:
    """Read an added predictor.

    With `known_after` every date is kept, dates may be coarser than the interval, and dates before `first` count, for
    the newest value known at the first period is older than it.
    """
    return _control(source, _span(interval, first, last))


def _span(interval: Interval, first: str | None, last: str | None) -> Span:
    return Span(interval, bound(first, upper=False), bound(last, upper=True))


def _control(source: Source, span: Span) -> Table:
    table = _table(source, replace(span, first=span.first if source.known_after is None else None, control=True), None)
    wrong = [key for key in table.keys if key not in CONTROL_KEYS]
    if wrong:
        raise DataError(
            f"{source.file}: {source.role!r} is given by {wrong[0]}; allowed for an added predictor is by date alone, "
            f"or also by {', '.join(CONTROL_KEYS)}"
        )
    return table


def _table(source: Source, span: Span, panel: PanelColumns | None) -> Table:
    if source.known_after is not None and panel is not None:
        raise DataError(
            f"{source.file}: known_after is declared for a panel; its rows stand at their origin dates already, so "
            "build its columns from what was known then"
        )
    cells = read_cells(source)
    layout = find_layout(source, list(cells.columns), panel)
    days, numbers = read_dates(source, cells[layout.date], span.interval, coarse=span.keeps_every_date(source))
    if source.known_after is not None:
        numbers = ordinal(span.stands(source, days), span.interval)
    frame, keys = long_rows(source, cells, layout)
    repeat = len(frame) // len(cells)
    frame.insert(2, "date", np.repeat(days.astype("datetime64[s]"), repeat))
    frame.insert(3, "ordinal", np.repeat(numbers, repeat))
    names = [*layout.values] or ["value"]
    kept, ledger = account(source, frame, keys=keys, names=names, span=span)
    return Table(source, keys, kept, ledger)
