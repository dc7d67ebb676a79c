"""Tables become dense arrays on the market's calendar, in log units, NaN for every hole."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
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


@dataclass(frozen=True, eq=False, slots=True)
class Quotes:
    """Exchange rates: `home` are log home prices of foreign currency, `crosses` log prices of pairs without home.

    Codes of `crosses` are pairs as written, base first.
    """

    home: Panel
    crosses: Panel


def levels(tables: Sequence[Table], calendar: Calendar, key: str) -> Panel:
    """Raw values of plain series by one key (T, N)."""
    codes = sorted({code for table in tables for code in _codes(table, key)})
    values = np.full((len(calendar), len(codes)), np.nan)
    for table in tables:
        frame = table.frame
        _put(table, values, (calendar.locate(frame["ordinal"].to_numpy()), _places(frame, key, codes)), _mid(frame))
    return Panel(tuple(codes), values)


def curves(tables: Sequence[Table], calendar: Calendar, key: str, length: str) -> Curves:
    """Declared rates as log rates per year (T, N, M), with length x rate the log growth over the length."""
    codes = sorted({code for table in tables for code in _codes(table, key)})
    names = sorted({name for table in tables for name in _codes(table, length)}, key=_order)
    values = np.full((len(calendar), len(codes), len(names)), np.nan)
    for table in tables:
        frame = table.frame
        rows = calendar.locate(frame["ordinal"].to_numpy())
        _put(
            table,
            values,
            (rows, _places(frame, key, codes), _places(frame, length, names)),
            _log_rates(table, key, length),
        )
    return Curves(tuple(codes), tuple(parse_tenor(name) for name in names), values)


def _order(name: str) -> tuple[float, str]:
    return parse_tenor(name).years, name


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


def _mid(frame: pd.DataFrame) -> Floats:
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


def spot_quotes(tables: Sequence[Table], calendar: Calendar, home: str) -> Quotes:
    """Spot rates of every declared direction as log home prices of foreign currency; home in itself is left out."""
    found: dict[str, Floats] = {}
    crosses: dict[str, Floats] = {}
    for table in tables:
        panel = levels((table,), calendar, _quote_key(table))
        for at, code in enumerate(panel.codes):
            log_price, (base, quote) = np.log(panel.values[:, at]), _pair(table.source, code, home)
            if base != quote and home in (base, quote):
                currency, sign = _foreign(base, quote, home)
                found[currency] = _joined(table.source, found.get(currency), sign * log_price, currency)
            elif base != quote:
                crosses[code] = _joined(table.source, crosses.get(code), log_price, code)
    if not found:
        raise DataError(f"{tables[0].source.file}: no pair with the home currency {home!r}; check home and the pairs")
    return Quotes(_panel(found, len(calendar)), _panel(crosses, len(calendar)))


def _panel(columns: Mapping[str, Floats], T: int) -> Panel:
    codes = sorted(columns)
    return Panel(tuple(codes), np.stack([columns[code] for code in codes], axis=1) if codes else np.empty((T, 0)))


def _joined(source: Source, old: Floats | None, new: Floats, name: str) -> Floats:
    if old is None:
        return new
    both = np.isfinite(old) & np.isfinite(new)
    if (np.abs(old - new)[both] > 1e-9).any():
        raise DataError(f"{source.file}: {name} is quoted twice with different values; keep one source")
    return np.where(np.isfinite(old), old, new)


def split_pair(source: Source, pair: str) -> tuple[str, str]:
    """Base and quote of a pair written BBBQQQ or BBB/QQQ."""
    parts = pair.split("/") if "/" in pair else [pair[:3], pair[3:]]
    if len(parts) != 2 or not all(len(part) == 3 for part in parts):
        raise DataError(f"{source.file}: pair {pair!r} is not allowed; allowed are BBBQQQ and BBB/QQQ, base first")
    return parts[0], parts[1]


def _pair(source: Source, code: str, home: str) -> tuple[str, str]:
    """Base and quote currency of one series."""
    if source.quote == "pair":
        return split_pair(source, code)
    return (code, home) if source.quote == "home per foreign" else (home, code)


def _foreign(base: str, quote: str, home: str) -> tuple[str, float]:
    """Foreign currency of a pair with home, and the sign that makes its log a home price."""
    return (base, 1.0) if quote == home else (quote, -1.0)


def forward_quotes(tables: Sequence[Table], spot: Sequence[Table], calendar: Calendar, home: str) -> Curves:
    """Outright forwards as log home prices of foreign currency (T, N, M); points are added to their own spot quote."""
    found: dict[tuple[str, str], Floats] = {}
    quoted = [(table.source, levels((table,), calendar, _quote_key(table))) for table in spot]
    for table in tables:
        raw = _raw_curves(table, calendar, "pair" if "pair" in table.keys else "currency")
        for n, code in enumerate(raw.codes):
            for m, tenor in enumerate(raw.tenors):
                log_price, currency = _outright(table.source, quoted, (code, home), raw.values[:, n, m])
                if currency:
                    place = (currency, tenor.canonical)
                    found[place] = _joined(table.source, found.get(place), log_price, f"{code} {tenor}")
    codes = sorted({code for code, _ in found})
    names = sorted({name for _, name in found}, key=_order)
    values = np.full((len(calendar), len(codes), len(names)), np.nan)
    for (code, name), column in found.items():
        values[:, codes.index(code), names.index(name)] = column
    return Curves(tuple(codes), tuple(parse_tenor(name) for name in names), values)


def _raw_curves(table: Table, calendar: Calendar, key: str) -> Curves:
    codes = sorted(_codes(table, key))
    names = sorted(_codes(table, "tenor"), key=_order)
    values = np.full((len(calendar), len(codes), len(names)), np.nan)
    frame = table.frame
    rows = calendar.locate(frame["ordinal"].to_numpy())
    points = table.source.quote == "points" and "bid" in frame.columns
    middle = (frame["bid"] + frame["ask"]).to_numpy() / 2 if points else _mid(frame)
    _put(table, values, (rows, _places(frame, key, codes), _places(frame, "tenor", names)), middle)
    return Curves(tuple(codes), tuple(parse_tenor(name) for name in names), values)


def _quote_key(table: Table) -> str:
    return "pair" if table.source.quote == "pair" else "currency"


def _outright(
    source: Source, spot: Sequence[tuple[Source, Panel]], codes: tuple[str, str], raw: Floats
) -> tuple[Floats, str]:
    """Log home price and currency of one forward series; no currency for a cross."""
    code, home = codes
    if source.quote != "points":
        base, quote = _pair(source, code, home)
        price = raw
    else:
        (base, quote), price = _on_spot(source, spot, codes, raw)
    if home not in (base, quote) or base == quote:
        return raw, ""
    currency, sign = _foreign(base, quote, home)
    return sign * np.log(price), currency


def _on_spot(
    source: Source, spot: Sequence[tuple[Source, Panel]], codes: tuple[str, str], points: Floats
) -> tuple[tuple[str, str], Floats]:
    """The pair of a series of points, and the outright price: the middle of spot plus points over scale."""
    code, home = codes
    (scale,) = by_code(source.scale, [_scaled_code(source, code, home)], source, "scale")
    for declared, panel in spot:
        for name in panel.codes:
            pair = _pair(declared, name, home)
            if set(pair) == {code, home} if len(code) == 3 else pair == split_pair(source, code):
                price = panel.column(name) + points / float(scale)  # type: ignore[arg-type]
                if (price <= 0).any():
                    raise DataError(
                        f"{source.file}: {code}: points of {points[price <= 0][0]:g} with scale {scale} leave no "
                        "forward price above zero; check scale and the direction of the points"
                    )
                return pair, price
    raise DataError(
        f"{source.file}: points for {code!r} have no spot rate to stand on; give its spot in the same direction"
    )


def _scaled_code(source: Source, code: str, home: str) -> str:
    """The code under which `scale` names a series: the pair itself or its foreign currency."""
    if code in source.scale or len(code) == 3:
        return code
    base, quote = split_pair(source, code)
    return base if quote == home else quote
