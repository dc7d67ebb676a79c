"""What becomes of every value read: used, or dropped for one stated reason, and counted by series."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt
import pandas as pd

from carrylab.data.calendar import Days, Interval, Ints, add
from carrylab.errors import DataError
from carrylab.options import Source

REASONS = ("read", "missing", "duplicates", "outside", "superseded", "used")
ABOVE_ZERO = ("prices", "total_return", "spot", "forwards")
Flags = npt.NDArray[np.bool_]


@dataclass(frozen=True, eq=False, slots=True)
class Span:
    """The interval, the first and last day allowed (None: no bound), and whether an added predictor is read."""

    interval: Interval
    first: np.datetime64 | None
    last: np.datetime64 | None
    control: bool = False

    def keeps_every_date(self, source: Source) -> bool:
        """Whether a date counts by when it was known rather than by its period."""
        return self.control and source.known_after is not None

    def stands(self, source: Source, days: Days) -> Days:
        """The day from which each value counts: a series published late when it was known, in signals and outcomes."""
        return days if self.control or source.known_after is None else add(days, source.known_after)


@dataclass(frozen=True, eq=False, slots=True)
class Account:
    """Counts by series while rows are dropped: `labels` of the S series, `counts` a reason -> (S,)."""

    labels: Sequence[str]
    counts: dict[str, Ints] = field(default_factory=dict)

    def note(self, reason: str, series: Ints) -> None:
        """Count the rows of each series under one reason."""
        self.counts[reason] = np.bincount(series, minlength=len(self.labels))


def account(
    source: Source, frame: pd.DataFrame, *, keys: tuple[str, ...], names: Sequence[str], span: Span
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Drop holes, dates outside the span, repetitions and all but the last date of a period.

    Returns the rows kept, sorted by keys and date, and the ledger. Raises DataError for a price not above zero, for
    one series and date with two values, and for several dates in the period of an average.
    """
    series, labels = _series(frame, keys)
    book = Account(labels)
    book.note("read", series)
    frame = frame.assign(series=series)

    def without(rows: pd.DataFrame, reason: str, gone: Flags) -> pd.DataFrame:
        book.note(reason, rows["series"].to_numpy()[gone])
        return rows[~gone] if gone.any() else rows

    frame = without(frame, "missing", _missing(frame, names))
    frame = without(frame, "outside", _outside(source, frame, span))
    if source.role in ABOVE_ZERO and source.quote != "points" and not span.control:
        _require_above_zero(source, frame, labels, names)
    frame = frame.iloc[np.lexsort((frame["row"], frame["date"], frame["series"]))]
    frame = without(frame, "duplicates", _repeated(source, frame, labels, names))
    frame = without(frame, "superseded", _superseded(source, frame, labels, span))
    book.note("used", frame["series"].to_numpy())
    return frame.drop(columns="series").reset_index(drop=True), _ledger(source, frame, book)


def _series(frame: pd.DataFrame, keys: tuple[str, ...]) -> tuple[Ints, list[str]]:
    """Number and label of the series each row belongs to, in the order of the keys."""
    number = np.zeros(len(frame), dtype=np.int64)
    for key in keys:
        number = number * len(frame[key].cat.categories) + frame[key].cat.codes.to_numpy()
    _, first, series = np.unique(number, return_index=True, return_inverse=True)
    texts = [frame[key].iloc[first].astype(str) for key in keys]
    return series, [" ".join(codes) for codes in zip(*texts, strict=True)] or ["all"]


def _missing(frame: pd.DataFrame, names: Sequence[str]) -> Flags:
    """Rows without any value; a two-way quote needs both sides, as one side alone has no middle."""
    holes: Flags = np.isnan(frame[list(names)].to_numpy())
    enough = np.any if list(names) == ["bid", "ask"] else np.all
    return np.asarray(enough(holes, axis=1))


def _outside(source: Source, frame: pd.DataFrame, span: Span) -> Flags:
    days = span.stands(source, frame["date"].to_numpy().astype("datetime64[D]"))
    gone = np.zeros(len(frame), dtype=bool)
    if span.first is not None:
        gone |= days < span.first
    if span.last is not None:
        gone |= days > span.last
    return gone


def _require_above_zero(source: Source, frame: pd.DataFrame, labels: Sequence[str], names: Sequence[str]) -> None:
    for name in names:
        low = (frame[name] <= 0).to_numpy()
        if low.any():
            row = frame.iloc[int(np.argmax(low))]
            raise DataError(
                f"{source.file}: row {row['row']}, {labels[row['series']]}: {name} {row[name]:g} is no price; allowed "
                "is above zero, and an empty cell where there is none"
            )


def _repeated(source: Source, frame: pd.DataFrame, labels: Sequence[str], names: Sequence[str]) -> Flags:
    """Rows that say the same again; two rows of one series and date that differ are an error."""
    again = _as_before(frame, "date")
    values = frame[list(names)].to_numpy()
    before = np.roll(values, 1, axis=0)
    differs = again & ((values != before) & ~(np.isnan(values) & np.isnan(before))).any(axis=1)
    if differs.any():
        at = int(np.argmax(differs))
        name = names[int(np.argmax(values[at] != before[at]))]
        old, new = frame.iloc[at - 1], frame.iloc[at]
        raise DataError(
            f"{source.file}: rows {old['row']} and {new['row']} give {labels[new['series']]} on {new['date']:%Y-%m-%d} "
            f"two values, {name} {old[name]:.10g} and {new[name]:.10g}; allowed is one; keep one of the rows"
        )
    return again


def _superseded(source: Source, frame: pd.DataFrame, labels: Sequence[str], span: Span) -> Flags:
    """All but the last date of each period."""
    if span.keeps_every_date(source):
        return np.zeros(len(frame), dtype=bool)
    second = _as_before(frame, "ordinal")
    if second.any() and source.timing == "average":
        row = frame.iloc[int(np.argmax(second))]
        raise DataError(
            f"{source.file}: row {row['row']}: {labels[row['series']]} has a second date, {row['date']:%Y-%m-%d}, in "
            f'one {span.interval}, but timing = "average" allows one average a {span.interval}; average them first, or '
            'declare timing = "end"'
        )
    return np.append(second[1:], False) if len(second) else second


def _as_before(frame: pd.DataFrame, column: str) -> Flags:
    """Where a row has the series and the `column` of the row before it."""
    same = np.zeros(len(frame), dtype=bool)
    series, values = frame["series"].to_numpy(), frame[column].to_numpy()
    same[1:] = (series[1:] == series[:-1]) & (values[1:] == values[:-1])
    return same


def _ledger(source: Source, frame: pd.DataFrame, book: Account) -> pd.DataFrame:
    ledger = pd.DataFrame({"file": source.file, "series": book.labels})
    for reason in REASONS:
        ledger[reason] = book.counts[reason]
    dates = frame.groupby("series")["date"].agg(["first", "last"]).reindex(range(len(book.labels)))
    for end in ("first", "last"):
        ledger[end] = dates[end].dt.strftime("%Y-%m-%d").fillna("").to_numpy(dtype=object)
    return ledger
