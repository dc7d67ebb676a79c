"""Declared files become tables: one row a series and period, everything dropped counted in a ledger."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from carrylab.data.calendar import Calendar, Floats, Ints, Interval, make_calendar, parse_tenor
from carrylab.data.dates import bound, read_dates
from carrylab.data.files import read_cells, require_column
from carrylab.data.numbers import read_numbers
from carrylab.errors import DataError
from carrylab.options import Market, Source

KEYS = ("economy", "currency", "pair", "index", "entity", "maturity", "tenor")
LENGTHS = ("maturity", "tenor")
ABOVE_ZERO = ("prices", "total_return", "spot", "forwards")
LEDGER = ("read", "missing", "duplicates", "outside", "superseded", "used")


@dataclass(frozen=True, eq=False, slots=True)
class Table:
    """One source as read, raw values not yet converted.

    `keys` name the code columns. `frame` has file, row (line in the file, header 1), date, ordinal (period number),
    the keys as text (lengths in canonical form) and the values: `value`, or `bid` and `ask`, or the named columns of
    a panel; one row a series and period, sorted by keys and date, holes left out. `ledger` has one row a series:
    file, series, read, missing, duplicates, outside, superseded, used, first, last.
    """

    source: Source
    keys: tuple[str, ...]
    frame: pd.DataFrame
    ledger: pd.DataFrame


@dataclass(frozen=True, eq=False, slots=True)
class MarketData:
    """All tables of one market by role, its added predictors, and the calendar of everything observed."""

    market: Market
    tables: Mapping[str, tuple[Table, ...]]
    controls: tuple[Table, ...]
    calendar: Calendar


@dataclass(frozen=True, eq=False, slots=True)
class Span:
    """The market's interval and the period numbers of its first and last date, where it has them."""

    interval: Interval
    first: int | None
    last: int | None


def read_market(market: Market) -> MarketData:
    """Read every file of a market; DataError, one line, for the first thing that cannot be read as declared."""
    span = _span(market.interval, market.first, market.last)
    if market.panel is not None:
        panel = market.panel
        wanted = [panel.signal, *panel.controls, *(leg.column for leg in panel.legs)]
        wanted += [leg.one_step for leg in panel.legs if leg.one_step]
        renamed = {panel.entity: "entity"} if panel.entity else {}
        tables = {
            role: tuple(_table(source, span, tuple(dict.fromkeys(wanted)), renamed) for source in sources)
            for role, sources in market.sources.items()
        }
    else:
        tables = {
            role: tuple(_table(source, span, (), {}) for source in sources) for role, sources in market.sources.items()
        }
    observed = [table.frame["ordinal"].to_numpy() for found in tables.values() for table in found]
    numbers = np.concatenate(observed)
    if not len(numbers):
        raise DataError(f"market {market.name!r}: no observation lies between from and until; widen them")
    early = Span(market.interval, None, span.last)
    controls = tuple(_table(source, early, (), {}) for source in market.controls)
    return MarketData(market, tables, controls, make_calendar(market.interval, numbers))


def read_source(source: Source, *, interval: Interval, first: str | None, last: str | None) -> Table:
    """Read one declared file of series."""
    return _table(source, _span(interval, first, last), (), {})


def _span(interval: Interval, first: str | None, last: str | None) -> Span:
    return Span(interval, bound(first, interval, upper=False), bound(last, interval, upper=True))


def _table(source: Source, span: Span, wanted: Sequence[str], renamed: Mapping[str, str]) -> Table:
    cells = _renamed(source, read_cells(source), renamed)
    require_column(source, list(cells.columns), "date")
    days, numbers = read_dates(source, cells["date"], span.interval)
    frame, keys, names = _long(source, cells, wanted)
    repeat = len(frame) // len(cells)
    frame["date"] = np.repeat(days, repeat).astype("datetime64[s]")
    frame["ordinal"] = np.repeat(numbers, repeat)
    frame, ledger = _account(source, frame, keys, names, span)
    return Table(source, keys, frame, ledger)


def _renamed(source: Source, cells: pd.DataFrame, renamed: Mapping[str, str]) -> pd.DataFrame:
    """Names in the file become the words they stand for."""
    words = (*KEYS, "date", "value", "bid", "ask")
    mapping = {name: word for name, word in source.columns.items() if not source.spread or word in words} | renamed
    for name in (*source.columns, *renamed):
        require_column(source, list(cells.columns), name)
    return cells.rename(columns=mapping)


def _long(source: Source, cells: pd.DataFrame, wanted: Sequence[str]) -> tuple[pd.DataFrame, tuple[str, ...], list[str]]:
    """Long form: file, row, keys and values; a wide file's columns become rows."""
    own = [key for key in KEYS if key in cells.columns]
    if source.spread or source.pattern:
        values = [name for name in cells.columns if name not in (*own, "date")]
        codes = _codes_of_columns(source, values)
        names = ["value"]
    else:
        names = list(wanted) or _value_columns(source, cells, own)
        values, codes = names, []
    for name in values:
        require_column(source, list(cells.columns), name)
    numbers = read_numbers(source, cells[values])
    frame = _stack(source, cells, own, numbers if codes else None, codes)
    if not codes:
        frame = pd.concat([frame, pd.DataFrame(numbers, columns=names)], axis=1)
    for key, value in {**source.constants, **({"tenor": str(source.tenor)} if source.tenor else {})}.items():
        frame[key] = pd.Categorical.from_codes(np.zeros(len(frame), dtype=np.int8), [_code(source, key, value, 1)])
    keys = tuple(key for key in KEYS if key in frame.columns)
    return frame, keys, names


def _value_columns(source: Source, cells: pd.DataFrame, own: Sequence[str]) -> list[str]:
    rest = [name for name in cells.columns if name not in (*own, "date")]
    if {"bid", "ask"} <= set(rest):
        return ["bid", "ask"]
    if "value" in rest:
        return ["value"]
    if len(rest) == 1:
        cells.rename(columns={rest[0]: "value"}, inplace=True)
        return ["value"]
    raise DataError(
        f"{source.file}: no column 'value', nor 'bid' and 'ask', among {', '.join(rest) or 'none'}; map it with "
        'columns = { name_in_file = "value" }, or name the key that runs along the columns with spread'
    )


def _codes_of_columns(source: Source, names: Sequence[str]) -> list[dict[str, str]]:
    """The keys that each column of a wide file stands for."""
    found = []
    for name in names:
        if source.pattern:
            match = re.fullmatch(source.pattern, name)
            if not match:
                raise DataError(f"{source.file}: column {name!r} does not fit the pattern {source.pattern!r}")
            found.append({key: _code(source, key, value, 1) for key, value in match.groupdict().items()})
        elif source.spread:
            found.append({source.spread: _code(source, source.spread, source.columns.get(name, name), 1)})
    return found


def _code(source: Source, key: str, value: str, row: int) -> str:
    if value == "":
        raise DataError(f"{source.file}: row {row}, column {key}: empty; every row needs its {key}")
    if key not in LENGTHS:
        return value
    try:
        return parse_tenor(value).canonical
    except ValueError as refused:
        raise DataError(f"{source.file}: row {row}, {key} {refused}") from None


def _stack(
    source: Source, cells: pd.DataFrame, own: Sequence[str], numbers: Floats | None, codes: list[dict[str, str]]
) -> pd.DataFrame:
    repeat = len(codes) or 1
    frame = pd.DataFrame({"row": np.repeat(np.asarray(cells.index), repeat)})
    frame.insert(0, "file", pd.Categorical.from_codes(np.zeros(len(frame), dtype=np.int8), [source.file]))
    for key in own:
        texts, at = np.unique(cells[key].to_numpy(dtype=str), return_inverse=True)
        rows = [int(cells.index[np.flatnonzero(at == number)[0]]) for number in range(len(texts))]
        names = [_code(source, key, str(text).strip(), row) for text, row in zip(texts, rows, strict=True)]
        frame[key] = _category(names, np.repeat(at, repeat))
    if numbers is not None:
        for key in codes[0]:
            frame[key] = _category([code[key] for code in codes], np.tile(np.arange(repeat), len(cells)))
        frame["value"] = numbers.ravel()
    return frame


def _category(names: Sequence[str], at: Ints) -> pd.Categorical:
    """Categories of the distinct names, in sorted order."""
    distinct = sorted(set(names))
    place = np.array([distinct.index(name) for name in names])
    return pd.Categorical.from_codes(place[at], distinct)


def _account(
    source: Source, frame: pd.DataFrame, keys: tuple[str, ...], names: list[str], span: Span
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Drop holes, repetitions, dates outside the span and all but the last date of a period; count each."""
    series = _series_number(frame, keys)
    frame = frame.assign(series=series)
    count = int(series.max()) + 1
    counts = {"read": np.bincount(series, minlength=count)}

    def drop(reason: str, gone: np.ndarray) -> pd.DataFrame:
        counts[reason] = np.bincount(frame["series"][gone], minlength=count)
        return frame[~gone]

    labels = _labels(frame, keys, count)
    frame = drop("missing", frame[names].isna().all(axis=1).to_numpy())
    _require_above_zero(source, frame, names)
    frame = frame.sort_values(["series", "date", "row"], kind="stable")
    frame = drop("duplicates", _repeated(source, frame, labels, names))
    outside = np.zeros(len(frame), dtype=bool)
    if span.first is not None:
        outside |= (frame["ordinal"] < span.first).to_numpy()
    if span.last is not None:
        outside |= (frame["ordinal"] > span.last).to_numpy()
    frame = drop("outside", outside)
    frame = drop("superseded", _superseded(source, frame, labels))
    counts["used"] = np.bincount(frame["series"], minlength=count)
    ledger = pd.DataFrame({"file": source.file, "series": labels} | {reason: counts[reason] for reason in LEDGER})
    dates = frame.groupby("series")["date"].agg(["first", "last"]).reindex(range(count))
    for end in ("first", "last"):
        ledger[end] = [("" if pd.isna(date) else f"{date:%Y-%m-%d}") for date in dates[end]]
    return frame.drop(columns="series").reset_index(drop=True), ledger


def _series_number(frame: pd.DataFrame, keys: tuple[str, ...]) -> Ints:
    if not keys:
        return np.zeros(len(frame), dtype=np.int64)
    number = np.zeros(len(frame), dtype=np.int64)
    for key in keys:
        codes = frame[key].cat
        number = number * len(codes.categories) + codes.codes.to_numpy()
    return np.unique(number, return_inverse=True)[1]


def _labels(frame: pd.DataFrame, keys: tuple[str, ...], count: int) -> list[str]:
    firsts = frame.drop_duplicates("series").set_index("series")
    return [" ".join(str(firsts.at[number, key]) for key in keys) or "all" for number in range(count)]


def _require_above_zero(source: Source, frame: pd.DataFrame, names: list[str]) -> None:
    if source.role not in ABOVE_ZERO or source.quote == "points":
        return
    for name in names:
        low = (frame[name] <= 0).to_numpy()
        if low.any():
            row = frame[low].iloc[0]
            raise DataError(f"{source.file}: row {row['row']}: {name} {row[name]:g} is no price; allowed is above zero")


def _repeated(source: Source, frame: pd.DataFrame, labels: list[str], names: list[str]) -> np.ndarray:
    """Rows that say the same again; rows of one series and date that differ are an error."""
    again = ((frame["series"] == frame["series"].shift()) & (frame["date"] == frame["date"].shift())).to_numpy()
    values = frame[names].to_numpy()
    for at in np.flatnonzero(again):
        if not np.array_equal(values[at], values[at - 1], equal_nan=True):
            row, before = frame.iloc[at], frame.iloc[at - 1]
            raise DataError(
                f"{source.file}: rows {before['row']} and {row['row']} give {labels[row['series']]} on "
                f"{row['date']:%Y-%m-%d} two values, {before[names[0]]:g} and {row[names[0]]:g}; keep one"
            )
    return again


def _superseded(source: Source, frame: pd.DataFrame, labels: list[str]) -> np.ndarray:
    """All but the last date of each period."""
    later = ((frame["series"] == frame["series"].shift(-1)) & (frame["ordinal"] == frame["ordinal"].shift(-1))).to_numpy()
    if later.any() and source.timing == "average":
        row = frame.iloc[int(np.flatnonzero(later)[0])]
        raise DataError(
            f"{source.file}: row {row['row']}: {labels[row['series']]} has several dates in one period, but timing = "
            '"average" says one average a period; average them first or declare timing = "end"'
        )
    return later
