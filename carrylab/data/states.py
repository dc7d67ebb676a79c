"""A state by date: spells with from and until, or a file of dates and labels, laid on a calendar."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

from carrylab.data.calendar import Calendar, add
from carrylab.data.dates import bound, read_dates
from carrylab.data.files import read_cells, require_column
from carrylab.errors import DataError
from carrylab.options import Source

Labels = npt.NDArray[np.object_]
INSIDE = {"0": False, "1": True, "0.0": False, "1.0": True}


def read_labels(source: Source, name: str, calendar: Calendar) -> Labels:
    """The state's label in every period (T,), empty where it is not known.

    A file with the columns from and until holds spells; any other has date and value, a value of 1 or 0, or a label of
    its own. Labels are `name` and `not name`, or `name: label`. With `known_after` a period has the newest label whose
    date plus the delay is not after its last day, and a spell starts and ends that much later.
    """
    cells = read_cells(source).rename(columns=dict(source.columns))
    if {"from", "until"} <= set(cells.columns):
        return _spells(source, cells, name, calendar)
    require_column(source, cells.columns, "date")
    require_column(source, cells.columns, "value")
    days, numbers = read_dates(source, cells["date"], calendar.interval, coarse=source.known_after is not None)
    _require_once(source, cells, days)
    labels = np.array([_label(text.strip(), name) for text in cells["value"]], dtype=object)
    found = np.full(len(calendar), "", dtype=object)
    if source.known_after is None:
        rows = calendar.locate(numbers)
        found[rows[rows >= 0]] = labels[rows >= 0]
        return found
    order = np.argsort(days, kind="stable")
    newest = np.searchsorted(add(days[order], source.known_after), calendar.days, side="right") - 1
    found[newest >= 0] = labels[order][newest[newest >= 0]]
    return found


def _label(text: str, name: str) -> str:
    if text in INSIDE:
        return name if INSIDE[text] else f"not {name}"
    return f"{name}: {text}" if text else ""


def _require_once(source: Source, cells: pd.DataFrame, days: npt.NDArray[np.datetime64]) -> None:
    _, first, counts = np.unique(days, return_index=True, return_counts=True)
    if (counts > 1).any():
        at = int(first[counts > 1][0])
        raise DataError(
            f"{source.file}: row {cells.index[at]}: date {cells['date'].iloc[at]!r} stands {counts.max()} times; "
            "allowed is one state a date"
        )


def _spells(source: Source, cells: pd.DataFrame, name: str, calendar: Calendar) -> Labels:
    """Inside a spell from the first day of its first period to the last day of its last, both included."""
    inside = np.zeros(len(calendar), dtype=bool)
    for row, start, end in zip(cells.index, cells["from"], cells["until"], strict=True):
        try:
            first, last = bound(start.strip(), upper=False), bound(end.strip(), upper=True)
        except ValueError as refused:
            raise DataError(f"{source.file}: row {row}: {refused}") from None
        assert first is not None
        assert last is not None
        if first > last:
            raise DataError(
                f"{source.file}: row {row}: until {end!r} lies before from {start!r}; allowed is a later date"
            )
        if source.known_after is not None:
            first, last = add(np.array([first, last]), source.known_after)
        inside |= (calendar.days >= first) & (calendar.days <= last)
    return np.where(inside, name, f"not {name}").astype(object)
