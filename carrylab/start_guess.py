"""What the cells of a data file give away: dates, keys, lengths, the probable role. A unit or a direction never is."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from statistics import median

from carrylab.data.calendar import Interval, Tenor, parse_tenor
from carrylab.errors import DataError

Cells = Mapping[str, Sequence[str]]
SYNONYMS: Mapping[str, str] = {"country": "economy", "ccy": "currency", "term": "tenor"}
KEYS = ("economy", "currency", "pair", "index", "entity", "maturity", "tenor")
LENGTHS = ("maturity", "tenor")
VALUES = ("value", "bid", "ask")
SHAPES: tuple[tuple[str, re.Pattern[str]], ...] = (
    ("pair", re.compile(r"[A-Z]{3}/?[A-Z]{3}")),
    ("currency", re.compile(r"[A-Z]{3}")),
    ("economy", re.compile(r"[A-Z]{2}")),
)
NUMBERED = re.compile(r"([A-Za-z_]+)0*(\d+)([mMyY]?)")
NUMBER = re.compile(r"[+-\N{MINUS SIGN}]?(\d+([.,]\d*)?|[.,]\d+)([eE][+-]?\d+)?")
COMMA = re.compile(r"[+-]?\d+,\d+")
MARKS = ("n/a", "N/A", "NA", "#N/A", "NaN", "nan", "null", "NULL", ".", "..", "-")
# Words of a file's or a column's name, the more telling first.
WORDS: Mapping[str, tuple[str, ...]] = {
    "forwards": ("forward", "forwards", "fwd", "points"),
    "total_return": ("total", "tr"),
    "dividends": ("dividend", "dividends", "div", "dps"),
    "deposits": ("deposit", "deposits", "bill", "bills", "money"),
    "zero_yields": ("zero", "zeros", "yield", "yields", "curve"),
    "prices": ("price", "prices", "equity", "equities", "index", "indices"),
    "spot": ("spot", "fx", "exchange", "currencies"),
}
EQUITY_ROLES = ("prices", "dividends", "total_return")
GAPS: tuple[tuple[float, Interval], ...] = ((4, "day"), (10, "week"), (45, "month"), (135, "quarter"))
LONGEST_DEPOSIT = Tenor(months=12)


@dataclass(frozen=True, slots=True)
class Dates:
    """The date column, its interval (None: cannot be told) and its order of day and month ("" for ISO, "?" unknown)."""

    column: str
    interval: Interval | None
    order: str
    first: str
    last: str


@dataclass(frozen=True, slots=True)
class Head:
    """What one file gives away.

    `keys` maps a key word to its column, `codes` a key word to the codes seen. `spread` is the key that runs along
    the columns of a wide file. `lengths` maps a column or cell to its length of time ("" where only a number is
    given). `values` are the columns of numbers, `spans` their smallest and largest. `roles` maps a role to its
    column of numbers ("" where no column needs a name), and is empty where the role cannot be told; a panel's role
    is "panel".
    """

    path: Path
    dates: Dates
    decimal: str
    missing: tuple[str, ...]
    keys: Mapping[str, str]
    codes: Mapping[str, tuple[str, ...]]
    spread: str
    lengths: Mapping[str, str]
    values: tuple[str, ...]
    spans: Mapping[str, tuple[float, float]]
    roles: Mapping[str, str]

    def span(self, column: str) -> tuple[float, float]:
        """Smallest and largest number of one column, or of all where none is named."""
        spans = [self.spans[column]] if column in self.spans else list(self.spans.values())
        return min(low for low, _ in spans), max(high for _, high in spans)


def read_head(path: Path) -> Head:
    """Recognise one file; DataError, one line, where it cannot be read or holds no dates or no numbers."""
    cells = _cells(path)
    dates = _dates(path, cells)
    rest = {name: column for name, column in cells.items() if name != dates.column}
    keys = _keys(rest)
    values = tuple(name for name in rest if name not in keys.values() and _is_numbers(rest[name]))
    if not values:
        raise DataError(f"{path}: no column of numbers; found {', '.join(cells)}; a data file needs one")
    spread, lengths = _spread(values, keys)
    codes = {key: tuple(dict.fromkeys(rest[column])) for key, column in keys.items()}
    if spread and spread not in LENGTHS:
        codes[spread] = values
    for key in LENGTHS:
        lengths = lengths or {code: code for code in codes.get(key, ())}
    filled = {cell for name in values for cell in rest[name] if cell}
    decimal = "," if any(map(COMMA.fullmatch, filled)) else "."
    missing = tuple(mark for mark in MARKS if mark in filled)
    spans = {name: _span(rest[name]) for name in values}
    roles = _roles(path, (keys, spread, lengths), values)
    return Head(path, dates, decimal, missing, keys, codes, spread, lengths, values, spans, roles)


def _cells(path: Path) -> dict[str, list[str]]:
    # Imported here: reading needs pandas, and the command line must start without it.
    from carrylab.data.files import read_cells
    from carrylab.options import Source

    frame = read_cells(Source(role="start", path=path, file=str(path)))
    return {str(name): [str(cell).strip() for cell in frame[name]] for name in frame.columns}


def _dates(path: Path, cells: Cells) -> Dates:
    found = [dates for dates in (_date_column(name, column) for name, column in cells.items()) if dates]
    if not found:
        raise DataError(
            f"{path}: no column of dates among {', '.join(cells)}; allowed are cells such as 2024-01-31, 2024-01, "
            "2024-Q1 and 2024, or day and month in one order"
        )
    return next((dates for dates in found if "date" in dates.column.lower()), found[0])


def _date_column(name: str, column: Sequence[str]) -> Dates | None:
    from carrylab.data.dates import read_stamp

    distinct = sorted(set(column))
    orders = [order for order in ("", "dmy", "mdy") if _reads(distinct, order)]
    if not orders:
        return None
    days = sorted({read_stamp(cell, orders[0] or None).day for cell in distinct})
    order = orders[0] if len(orders) == 1 else "?"
    return Dates(name, _interval([day.toordinal() for day in days]), order, str(days[0]), str(days[-1]))


def _reads(cells: Iterable[str], order: str) -> bool:
    from carrylab.data.dates import read_stamp

    try:
        for cell in cells:
            read_stamp(cell, order or None)
    except ValueError:
        return False
    return True


def _interval(days: Sequence[int]) -> Interval | None:
    if len(days) < 2:
        return None
    gap = median(later - day for day, later in pairwise(days))
    return next((interval for most, interval in GAPS if gap <= most), "year")


def _is_numbers(column: Iterable[str]) -> bool:
    """Numbers, empty cells and known marks for missing; at least one number."""
    filled = {cell for cell in column if cell and cell not in MARKS}
    return bool(filled) and all(NUMBER.fullmatch(cell) for cell in filled)


def _span(column: Iterable[str]) -> tuple[float, float]:
    plain = (cell.replace("\N{MINUS SIGN}", "-").replace(",", ".") for cell in column if cell and cell not in MARKS)
    numbers = [float(cell) for cell in plain]
    return min(numbers), max(numbers)


def _keys(columns: Cells) -> dict[str, str]:
    """Key word -> column: by the column's name, else by the shape of its codes."""
    found: dict[str, str] = {}
    for name, column in columns.items():
        word = SYNONYMS.get(name.lower(), name.lower())
        if word not in KEYS and not _is_numbers(column):
            word = _shape(set(column))
        if word in KEYS:
            found.setdefault(word, name)
    return found


def _shape(codes: Iterable[str]) -> str:
    """The key whose codes look like these; "entity" for any other text."""
    texts = set(codes) - {""}
    if all(_length(text) for text in texts):
        return "tenor"
    return next((key for key, shape in SHAPES if all(map(shape.fullmatch, texts))), "entity")


def _length(text: str) -> str:
    try:
        return parse_tenor(text).canonical
    except ValueError:
        return ""


def _spread(values: Sequence[str], keys: Mapping[str, str]) -> tuple[str, dict[str, str]]:
    """The key along the columns of a wide file, and the lengths of time its columns name."""
    if all(map(_length, values)):
        return "tenor", {name: name for name in values}
    numbered = [found for found in map(NUMBERED.fullmatch, values) if found]
    if len(numbered) == len(values) > 2 and len({found[1] for found in numbered}) == 1:
        return "tenor", {found[0]: found[2] + found[3].lower() if found[3] else "" for found in numbered}
    taken = set(keys) & {"pair", "currency", "economy"}
    shaped = [key for key, shape in SHAPES if all(map(shape.fullmatch, values))]
    return (shaped[0] if shaped and not taken else ""), {}


def named_role(name: str) -> str:
    """The role that the words of a name tell, or ""."""
    words = {word for word in re.split(r"[^a-z]+", name.lower()) if word}
    return next((role for role, telling in WORDS.items() if words & set(telling)), "")


def _roles(
    path: Path, shape: tuple[Mapping[str, str], str, Mapping[str, str]], values: Sequence[str]
) -> dict[str, str]:
    keys, spread, lengths = shape
    names = {name.lower() for name in values}
    if spread or len(values) == 1 or "value" in names or {"bid", "ask"} <= names:
        role = named_role(path.stem) or _structural(set(keys) | {spread}, lengths)
        return {role: "" if spread or len(values) > 1 else values[0]} if role else {}
    by_column = {named_role(name): name for name in reversed(values)}
    if sum(role in by_column for role in EQUITY_ROLES) > 1:
        return {role: by_column[role] for role in (*EQUITY_ROLES, "deposits") if role in by_column}
    return {"panel": ""}


def _structural(keys: set[str], lengths: Mapping[str, str]) -> str:
    """The role that keys and lengths leave, where the name is silent."""
    if "pair" in keys:
        return "forwards" if lengths else "spot"
    if not lengths:
        return ""
    longest = max((parse_tenor(text) for text in lengths.values() if text), default=Tenor())
    return "deposits" if "currency" in keys and longest <= LONGEST_DEPOSIT else "zero_yields"
