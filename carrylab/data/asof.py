"""What was known at t: added predictors joined by publication date, never by row."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd

from carrylab.data.calendar import Calendar, Floats, Tenor, add
from carrylab.data.files import shown
from carrylab.data.read import Table
from carrylab.errors import DataError


def as_of(calendar: Calendar, table: Table, codes: Sequence[str]) -> Floats:
    """The table's value known at the end of each period, (T, N), one column a code.

    Without `known_after` only the value of that very period counts. With it, the newest value whose date plus the
    delay is not after the period's last day. A code is the entity's value of each of the table's keys, joined by
    spaces; a table without keys serves every code. DataError where no code is in the table.
    """
    frame = table.frame
    if not table.keys:
        return np.repeat(_known(calendar, frame, table.source.known_after)[:, None], len(codes), axis=1)
    labels = frame[table.keys[0]].astype(str)
    for key in table.keys[1:]:
        labels = labels + " " + frame[key].astype(str)
    series = dict(tuple(frame.groupby(labels)))
    if not series.keys() & set(codes):
        raise DataError(
            f"{table.source.file}: {table.source.role!r} has no series for {shown(dict.fromkeys(codes))}; it has "
            f"{shown(series)} by {' and '.join(table.keys)}; give it the study's codes, or by date alone"
        )
    empty = frame.iloc[:0]
    return np.stack([_known(calendar, series.get(code, empty), table.source.known_after) for code in codes], axis=1)


def _known(calendar: Calendar, frame: pd.DataFrame, delay: Tenor | None) -> Floats:
    """One series, sorted by date, as known at the end of each of the T periods."""
    values: Floats = frame["value"].to_numpy()
    found = np.full(len(calendar), np.nan)
    if delay is None:
        rows = calendar.locate(frame["ordinal"].to_numpy())
        found[rows[rows >= 0]] = values[rows >= 0]
        return found
    known = add(frame["date"].to_numpy().astype("datetime64[D]"), delay)
    newest = np.searchsorted(known, calendar.days, side="right") - 1
    found[newest >= 0] = values[newest[newest >= 0]]
    return found
