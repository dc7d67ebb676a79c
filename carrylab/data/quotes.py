"""Exchange rates of every declared direction as log home prices of foreign currency, NaN for every hole."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.data.calendar import Calendar, Floats, parse_tenor
from carrylab.data.panel import Curves, Panel, by_code, by_length, levels, middle
from carrylab.data.read import Table
from carrylab.errors import DataError
from carrylab.options import Source


@dataclass(frozen=True, eq=False, slots=True)
class Quotes:
    """Exchange rates: `home` are log home prices of foreign currency, `crosses` log prices of pairs without home.

    Codes of `crosses` are pairs as written, base first.
    """

    home: Panel
    crosses: Panel


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
        by_pair = table.source.quote == "points" and "pair" in table.keys
        key = "pair" if by_pair else _quote_key(table)
        raw = by_length((table,), calendar, key=key, length="tenor", values_of=_quoted)
        for n, code in enumerate(raw.codes):
            for m, tenor in enumerate(raw.tenors):
                log_price, currency = _outright(table.source, quoted, (code, home), raw.values[:, n, m])
                if currency:
                    place = (currency, tenor.canonical)
                    found[place] = _joined(table.source, found.get(place), log_price, f"{code} {tenor}")
    codes = sorted({code for code, _ in found})
    names = sorted({name for _, name in found}, key=parse_tenor)
    values = np.full((len(calendar), len(codes), len(names)), np.nan)
    for (code, name), column in found.items():
        values[:, codes.index(code), names.index(name)] = column
    return Curves(tuple(codes), tuple(parse_tenor(name) for name in names), values)


def _quoted(table: Table) -> Floats:
    """The quotes of forwards; the middle of two-way points is that of their own, as they may have either sign."""
    if table.source.quote == "points" and "bid" in table.frame.columns:
        return np.asarray(table.frame["bid"] + table.frame["ask"]) / 2
    return middle(table.frame)


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
    pair, level = _spot_of(source, spot, codes)
    price = level + points / float(scale)  # type: ignore[arg-type]
    if (price <= 0).any():
        raise DataError(
            f"{source.file}: {code}: points of {points[price <= 0][0]:g} with scale {scale} leave no forward price "
            "above zero; check scale and the direction of the points"
        )
    return pair, price


def _spot_of(
    source: Source, spot: Sequence[tuple[Source, Panel]], codes: tuple[str, str]
) -> tuple[tuple[str, str], Floats]:
    """The pair and the spot price (T,) that points of one code stand on, from every file that quotes it that way."""
    code, home = codes
    quoted = [(_pair(declared, name, home), panel.column(name)) for declared, panel in spot for name in panel.codes]
    wanted = split_pair(source, code) if len(code) > 3 else None
    quoted = [(pair, price) for pair, price in quoted if pair == wanted or (not wanted and {*pair} == {code, home})]
    if not quoted:
        raise DataError(
            f"{source.file}: points for {code!r} have no spot rate to stand on; give its spot in the same direction"
        )
    first, level = quoted[0]
    for pair, price in quoted[1:]:
        level = np.where(np.isnan(level) & (pair == first), price, level)
    return first, level


def _scaled_code(source: Source, code: str, home: str) -> str:
    """The code under which `scale` names a series: the pair itself or its foreign currency."""
    if code in source.scale or len(code) == 3:
        return code
    base, quote = split_pair(source, code)
    return base if quote == home else quote
