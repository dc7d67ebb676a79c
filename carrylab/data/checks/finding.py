"""One finding of a load check, the dense form of a table that checks work on, and runs of flagged periods."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from carrylab.data.calendar import Calendar, Floats
from carrylab.data.read import MarketData, Table

Level = Literal["error", "warning", "note"]
Bools = np.typing.NDArray[np.bool_]
LENGTHS = ("maturity", "tenor")


@dataclass(frozen=True, slots=True)
class Check:
    """One finding; `first` and `last` are period names, or empty where it is about the whole series."""

    id: str
    level: Level
    file: str
    series: str
    first: str
    last: str
    seen: str
    advice: str

    def line(self) -> str:
        """The one printed line."""
        dates = self.first if self.first == self.last else f"{self.first} to {self.last}"
        place = " ".join(part for part in (self.file, self.series, dates) if part)
        return f"{self.level} {self.id} {place}: {self.seen}; {self.advice}"


@dataclass(frozen=True, eq=False, slots=True)
class Dense:
    """One table on the calendar: `labels` of its S series, their main `codes`, `values` (T, S) and observation `days`.

    Two-way quotes stand as their middle; `spread` (T, S) is ask less bid, all NaN where there is one value.
    """

    table: Table
    calendar: Calendar
    labels: tuple[str, ...]
    codes: tuple[str, ...]
    values: Floats
    spread: Floats
    days: np.typing.NDArray[np.datetime64]

    @property
    def file(self) -> str:
        """The file's name as declared."""
        return self.table.source.file

    @property
    def role(self) -> str:
        """What the file holds."""
        return self.table.source.role

    def logs(self) -> Floats:
        """Logs (T, S) of prices, which reading has found above zero."""
        return np.log(self.values)

    def changes(self) -> Floats:
        """Log changes (T, S) of a price, plain changes of anything else; NaN in the first row and beside holes."""
        levels = self.logs() if self.is_price() else self.values
        return np.diff(levels, axis=0, prepend=np.nan)

    def is_price(self) -> bool:
        """Whether the values are prices, which move in logs."""
        return self.role in ("spot", "prices", "total_return") or (
            self.role == "forwards" and self.table.source.quote != "points"
        )

    def found(self, check: tuple[str, Level], at: int, rows: slice | None, said: tuple[str, str]) -> Check:
        """A finding on one series, over some of its rows."""
        first, last = ("", "") if rows is None else (self.label(rows.start), self.label(rows.stop - 1))
        return Check(check[0], check[1], self.file, self.labels[at], first, last, said[0], said[1])

    def whole(self, check: tuple[str, Level], said: tuple[str, str]) -> Check:
        """A finding on the whole file."""
        stands = np.flatnonzero(np.isfinite(self.values).any(axis=1))
        first, last = self.label(int(stands[0])), self.label(int(stands[-1]))
        return Check(check[0], check[1], self.file, "", first, last, said[0], said[1])

    def span(self, at: int) -> slice:
        """Rows from the first to the last value of one series."""
        return span_of(self.values[:, at])

    def label(self, row: int) -> str:
        """Name of a period."""
        return self.calendar.label(row)


def dense_tables(data: MarketData) -> list[Dense]:
    """Every table of a market that holds a value, in dense form; a panel of the user's own is left aside."""
    found = [dense(table, data.calendar) for role, tables in data.tables.items() if role != "panel" for table in tables]
    return [one for one in found if one.labels]


def dense(table: Table, calendar: Calendar) -> Dense:
    """Spread one table over the calendar, a column a series."""
    frame = table.frame
    number = np.zeros(len(frame), dtype=np.int64)
    for key in table.keys:
        codes = frame[key].cat
        number = number * len(codes.categories) + codes.codes.to_numpy()
    distinct, first, series = np.unique(number, return_index=True, return_inverse=True)
    heads = frame.iloc[first]
    named = [key for key in table.keys if key not in LENGTHS]
    labels = [" ".join(str(row[key]) for key in table.keys) for row in heads.to_dict("records")]
    mains = [" ".join(str(row[key]) for key in named) for row in heads.to_dict("records")]
    rows = calendar.locate(frame["ordinal"].to_numpy())
    values, spread = (np.full((len(calendar), len(distinct)), np.nan) for _ in range(2))
    days = np.full((len(calendar), len(distinct)), np.datetime64("NaT", "D"))
    if "value" in frame:
        values[rows, series] = frame["value"].to_numpy()
    else:
        bid, ask = frame["bid"].to_numpy(), frame["ask"].to_numpy()
        values[rows, series] = (bid + ask) / 2
        spread[rows, series] = ask - bid
    days[rows, series] = frame["date"].to_numpy().astype("datetime64[D]")
    # A series of one-sided quotes has no middle, and so nothing to check.
    stands = np.flatnonzero(np.isfinite(values).any(axis=0))
    names, codes_of = (tuple(texts[at] for at in stands) for texts in (labels, mains))
    return Dense(table, calendar, names, codes_of, values[:, stands], spread[:, stands], days[:, stands])


def find_series(
    tables: Sequence[Dense], role: str, currencies: tuple[str, str], length: str = ""
) -> tuple[Dense, int] | None:
    """The series of a currency in the files of one role: the pair with home and the length asked for come first."""
    code, home = currencies
    found = [
        (home in label, label.endswith(length), one, at)
        for one in tables
        if one.role == role
        for at, label in enumerate(one.labels)
        if code in label
    ]
    if not found:
        return None
    *_, dense, at = max(found, key=lambda place: place[:2])
    return dense, at


def runs(flags: Bools) -> list[slice]:
    """Unbroken runs of True in a vector."""
    edges = np.flatnonzero(np.diff(np.concatenate([[0], flags.astype(np.int8), [0]])))
    return [slice(int(start), int(stop)) for start, stop in edges.reshape(-1, 2)]


def merged(checks: Iterable[Check]) -> Iterator[Check]:
    """Findings that differ only in the length of the rate become one on the code, which says how many there are."""
    groups: dict[tuple[str, ...], list[Check]] = {}
    for one in checks:
        code = one.series.rpartition(" ")[0] or one.series
        groups.setdefault((one.id, one.level, one.file, code, one.first, one.last), []).append(one)
    for (*_, code, _, _), own in groups.items():
        count = f" ({len(own)} series alike)" if len(own) > 1 else ""
        yield replace(own[0], series=code if len(own) > 1 else own[0].series, seen=own[0].seen + count)


def span_of(values: Floats) -> slice:
    """Rows from the first to the last value that stands."""
    here = np.flatnonzero(np.isfinite(values))
    return slice(int(here[0]), int(here[-1]) + 1)


def mad(values: Floats) -> float:
    """Median absolute deviation of the values that stand; NaN where fewer than twelve do."""
    known = values[np.isfinite(values)]
    return float(np.median(np.abs(known - np.median(known)))) if len(known) >= 12 else float("nan")
