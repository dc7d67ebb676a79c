"""What was known at t: added predictors joined by publication date, never by row."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from carrylab.data.calendar import Calendar, Floats, add
from carrylab.data.read import Table


def as_of(calendar: Calendar, table: Table, codes: Sequence[str]) -> Floats:
    """The table's value known at the end of each period, (T, N), one column a code.

    Without `known_after` only the value of that very period counts. With it, the newest value whose date plus the
    delay is not after the period's last day. A table without keys serves every code.
    """
    keys = [key for key in table.keys if key not in ("maturity", "tenor")]
    columns = {code: _column(calendar, table, code, keys) for code in dict.fromkeys(codes)}
    return np.stack([columns[code] for code in codes], axis=1)


def _column(calendar: Calendar, table: Table, code: str, keys: Sequence[str]) -> Floats:
    frame = table.frame
    own = frame[frame[keys[0]] == code] if keys else frame
    values, days = own["value"].to_numpy(), own["date"].to_numpy().astype("datetime64[D]")
    found = np.full(len(calendar), np.nan)
    delay = table.source.known_after
    if delay is None:
        rows = calendar.locate(own["ordinal"].to_numpy())
        found[rows[rows >= 0]] = values[rows >= 0]
        return found
    known = add(days, delay)
    newest = np.searchsorted(known, calendar.days, side="right") - 1
    there = newest >= 0
    found[there] = values[newest[there]]
    return found
