"""Tables become dense arrays on the market's calendar, in log units, NaN for every hole."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from carrylab.data.calendar import Calendar, Days, Floats, Tenor, add, parse_tenor
from carrylab.data.read import Table
from carrylab.data.units import accrual, log_rate, to_decimal
from carrylab.errors import DataError
from carrylab.options import Source


@dataclass(frozen=True, eq=False, slots=True)
class Panel:
    """One quantity by period and code: `values` (T, N)."""

    codes: tuple[str, ...]
    values: Floats

    def column(self, code: str) -> Floats:
        """One code's values (T,); all NaN where the panel does not hold it."""
        if code not in self.codes:
            return np.full(len(self.values), np.nan)
        return self.values[:, self.codes.index(code)]

    def pick(self, codes: Sequence[str]) -> Floats:
        """Columns of these codes (T, N)."""
        return np.stack([self.column(code) for code in codes], axis=1)


@dataclass(frozen=True, eq=False, slots=True)
class Curves:
    """One quantity by period, code and length of time: `values` (T, N, M), lengths ascending."""

    codes: tuple[str, ...]
    tenors: tuple[Tenor, ...]
    values: Floats

    @property
    def years(self) -> Floats:
        """Lengths in years (M,)."""
        return np.array([tenor.years for tenor in self.tenors])

    def at(self, tenor: Tenor) -> Panel | None:
        """The panel of one quoted length, or None where it is not quoted."""
        if tenor not in self.tenors:
            return None
        return Panel(self.codes, self.values[:, :, self.tenors.index(tenor)])

    def of(self, codes: Sequence[str]) -> Curves:
        """The curves of those of these codes that are here."""
        kept = [at for at, code in enumerate(self.codes) if code in codes]
        return Curves(tuple(self.codes[at] for at in kept), self.tenors, self.values[:, kept])

    def alike(self) -> list[Curves]:
        """The curves of codes that quote the same lengths, with those lengths alone."""
        quotes = np.isfinite(self.values).any(axis=0)
        found = []
        for lengths in np.unique(quotes, axis=0):
            kept = np.flatnonzero((quotes == lengths).all(axis=1))
            tenors = tuple(tenor for tenor, there in zip(self.tenors, lengths, strict=True) if there)
            found.append(Curves(tuple(self.codes[at] for at in kept), tenors, self.values[:, kept][:, :, lengths]))
        return found


def levels(tables: Sequence[Table], calendar: Calendar, key: str) -> Panel:
    """Raw values of plain series by one key (T, N)."""
    codes = sorted({code for table in tables for code in _codes(table, key)})
    values = np.full((len(calendar), len(codes)), np.nan)
    for table in tables:
        frame = table.frame
        _put(table, values, (calendar.locate(frame["ordinal"].to_numpy()), _places(frame, key, codes)), middle(frame))
    return Panel(tuple(codes), values)


def curves(tables: Sequence[Table], calendar: Calendar, key: str, length: str) -> Curves:
    """Declared rates as log rates per year (T, N, M), with length x rate the log growth over the length."""
    return by_length(tables, calendar, key=key, length=length, values_of=lambda table: _log_rates(table, key, length))


def by_length(
    tables: Sequence[Table], calendar: Calendar, *, key: str, length: str, values_of: Callable[[Table], Floats]
) -> Curves:
    """Values of every row of the tables, laid out by period, code and length (T, N, M)."""
    codes = sorted({code for table in tables for code in _codes(table, key)})
    names = sorted({name for table in tables for name in _codes(table, length)}, key=parse_tenor)
    values = np.full((len(calendar), len(codes), len(names)), np.nan)
    for table in tables:
        frame = table.frame
        rows = calendar.locate(frame["ordinal"].to_numpy())
        _put(table, values, (rows, _places(frame, key, codes), _places(frame, length, names)), values_of(table))
    return Curves(tuple(codes), tuple(parse_tenor(name) for name in names), values)


def _codes(table: Table, key: str) -> list[str]:
    if key not in table.keys:
        raise DataError(
            f"{table.source.file}: no column {key!r} for {table.source.role}; add it, or give it for the whole file "
            f'with {key} = "..."'
        )
    return [str(code) for code in table.frame[key].unique()]


def _places(frame: pd.DataFrame, key: str, codes: Sequence[str]) -> np.typing.NDArray[np.int64]:
    place = {code: at for at, code in enumerate(codes)}
    categories = frame[key].cat.categories
    return np.array([place.get(str(code), -1) for code in categories], dtype=np.int64)[frame[key].cat.codes.to_numpy()]


def middle(frame: pd.DataFrame) -> Floats:
    """The value, or the two-way quote's middle in logs, so that turning the quote round is exact.

    A quote with one side only has no middle.
    """
    if "value" in frame.columns:
        return np.asarray(frame["value"], dtype=np.float64)
    return np.sqrt(np.asarray(frame["bid"] * frame["ask"], dtype=np.float64))


def _put(table: Table, into: Floats, where: tuple[np.typing.NDArray[np.int64], ...], values: Floats) -> None:
    """Place values; two sources that give one cell different values are an error."""
    there = into[where]
    clash = np.isfinite(there) & np.isfinite(values) & ~np.isclose(there, values, rtol=1e-9, atol=0)
    if clash.any():
        at = int(np.flatnonzero(clash)[0])
        row = table.frame.iloc[at]
        series = " ".join(str(row[key]) for key in table.keys)
        raise DataError(
            f"{table.source.file}: row {row['row']}: {series} is {values[at]:.10g}, but {there[at]:.10g} in another "
            f"file of {table.source.role}; allowed is one value a series and period; keep one of the files"
        )
    into[where] = values


def by_code(mapping: Mapping[str, object], codes: Sequence[str], source: Source, key: str) -> list[object]:
    """The declared value of each code, or of "others"."""
    found = []
    for code in codes:
        if code not in mapping and "others" not in mapping:
            known = ", ".join(mapping)
            raise DataError(f"{source.file}: {key} has no value for {code!r}; it names {known}; add {code} or others")
        found.append(mapping.get(code, mapping.get("others")))
    return found


def _log_rates(table: Table, key: str, length: str) -> Floats:
    frame, source = table.frame, table.source
    rate = to_decimal(frame["value"].to_numpy(), source.unit)
    tenors = [parse_tenor(str(name)) for name in frame[length].cat.categories]
    of_row = frame[length].cat.codes.to_numpy().astype(np.int64)
    years = np.array([tenor.years for tenor in tenors])[of_row]
    tau = years
    if source.compounding in ("simple", "discount"):
        tau = _accruals(table, key, tenors, of_row)
    found = log_rate(rate, tau, years, source.compounding)
    if np.isnan(found).any():
        row = frame.iloc[int(np.flatnonzero(np.isnan(found))[0])]
        what = "discount factor" if source.compounding == "discount factor" else f"{source.compounding} rate"
        raise DataError(
            f"{source.file}: row {row['row']}: the {what} {row['value']:g} {source.unit} leaves no growth factor "
            "above zero; check unit and compounding"
        )
    return found


def _accruals(table: Table, key: str, tenors: Sequence[Tenor], of_row: np.typing.NDArray[np.int64]) -> Floats:
    """Accrual fraction of each row from its date to its date plus its length, by its currency's day count."""
    frame, source = table.frame, table.source
    start: Days = frame["date"].to_numpy().astype("datetime64[D]")
    days, at_day = np.unique(start, return_inverse=True)
    codes = [str(code) for code in frame[key].cat.categories]
    counts = by_code(source.day_count, codes, source, "day_count")
    of_code = frame[key].cat.codes.to_numpy()
    tau = np.empty(len(frame))
    for number, tenor in enumerate(tenors):
        ends = add(days, tenor)
        for count in dict.fromkeys(counts):
            here = (of_row == number) & np.isin(of_code, [at for at, own in enumerate(counts) if own == count])
            tau[here] = accrual(days, ends, count)[at_day[here]]  # type: ignore[arg-type]
    return tau
