"""From the cells of a long or a wide file to one row a value, with the keys as codes."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
import pandas as pd

from carrylab.data.calendar import Ints, parse_tenor
from carrylab.data.files import require_column, shown
from carrylab.data.numbers import read_numbers
from carrylab.errors import DataError
from carrylab.options import PanelColumns, Source

KEYS = ("economy", "currency", "pair", "index", "entity", "maturity", "tenor")
LENGTHS = ("maturity", "tenor")
RESERVED = ("file", "row", "date", "ordinal", "entity", "series")  # columns of a table and of its account
Codes: TypeAlias = "pd.Categorical[str]"


@dataclass(frozen=True, slots=True)
class Layout:
    """Which column of the file is what.

    `date` is its column, `keys` maps a key to its column, `values` the name of a value to its column. In a wide file
    `wide` maps each series column to the code of every key it stands for, and `values` is empty.
    """

    date: str
    keys: Mapping[str, str]
    values: Mapping[str, str]
    wide: Mapping[str, Mapping[str, str]]


def find_layout(source: Source, names: Sequence[str], panel: PanelColumns | None) -> Layout:
    """What each column of the file stands for; DataError where that is not clear."""
    words = _words(source, names)
    require_column(source, words, "date")
    if panel is not None:
        return _panel_layout(source, words, panel)
    keys = {key: words[key] for key in KEYS if key in words}
    rest = {word: name for word, name in words.items() if word not in (*keys, "date")}
    wide = _wide(source, rest) if source.spread or source.pattern else {}
    _refuse_twice(source, keys, wide)
    return Layout(words["date"], keys, {} if wide else _values(source, rest), wide)


def _words(source: Source, names: Sequence[str]) -> dict[str, str]:
    """Meaning -> column of the file, with the names the study maps."""
    for name in source.columns:
        if name not in names:
            raise DataError(f"{source.file}: columns maps {name!r}, which is no column; found: {shown(names)}")
    words: dict[str, str] = {}
    for name in names:
        word = source.columns.get(name, name)
        if word in words:
            both = f"columns {words[word]!r} and {name!r}"
            raise DataError(f"{source.file}: row 1: {both} both stand for {word!r}; keep one")
        words[word] = name
    return words


def _panel_layout(source: Source, words: Mapping[str, str], panel: PanelColumns) -> Layout:
    steps = [leg.one_step for leg in panel.legs if leg.one_step]
    wanted = dict.fromkeys([panel.signal, *panel.controls, *(leg.column for leg in panel.legs), *steps])
    entity = panel.entity or ("entity" if "entity" in words else None)
    for word in (*wanted, *([entity] if entity else [])):
        require_column(source, words, word)
    for word in wanted:
        if word in RESERVED:
            raise DataError(
                f"{source.file}: a signal, control or leg may not be called {word!r}; give it another name with "
                f'columns = {{ {words[word]} = "my {word}" }} and use that in the study'
            )
    keys = {"entity": words[entity]} if entity else {}
    return Layout(words["date"], keys, {word: words[word] for word in wanted}, {})


def _wide(source: Source, series: Mapping[str, str]) -> dict[str, dict[str, str]]:
    """The code of every key that each series column stands for."""
    if not series:
        raise DataError(f"{source.file}: has no column of values beside the date and the keys; expected one a series")
    found: dict[str, dict[str, str]] = {}
    for word, name in series.items():
        place = f"{source.file}: row 1, column {name!r}"
        codes = {key: _code(place, key, code) for key, code in _named_codes(source, word, place).items()}
        twin = next((other for other, same in found.items() if same == codes), None)
        if twin is not None:
            raise DataError(f"{place} stands for the same series as column {twin!r}; keep one")
        found[name] = codes
    return found


def _named_codes(source: Source, word: str, place: str) -> dict[str, str]:
    if source.pattern is None:
        return {str(source.spread): word}
    match = re.fullmatch(source.pattern, word)
    if match is None:
        raise DataError(f"{place} does not fit the pattern {source.pattern!r}; allowed are date, keys and series")
    unknown = [group for group in match.groupdict() if group not in KEYS]
    if unknown:
        raise DataError(f"{source.file}: the pattern's group {unknown[0]!r} is no key; allowed: {', '.join(KEYS)}")
    return {key: code or "" for key, code in match.groupdict().items()}


def _refuse_twice(source: Source, keys: Mapping[str, str], wide: Mapping[str, Mapping[str, str]]) -> None:
    """A key is given once: by a column, along the columns, or as one value for the whole file."""
    along = {key for codes in wide.values() for key in codes}
    for key in KEYS:
        if (key in keys) + (key in along) + (key in _constants(source)) > 1:
            raise DataError(
                f"{source.file}: the key {key!r} is given twice; allowed is one of a column, spread or pattern, and "
                f'{key} = "..." for the whole file'
            )


def _values(source: Source, rest: Mapping[str, str]) -> dict[str, str]:
    if source.quote is not None and "bid" in rest and "ask" in rest:
        return {"bid": rest["bid"], "ask": rest["ask"]}
    if "value" in rest:
        return {"value": rest["value"]}
    if len(rest) == 1:
        return {"value": next(iter(rest.values()))}
    two_way = "" if source.quote is None else ", nor 'bid' and 'ask'"
    raise DataError(
        f"{source.file}: no column 'value'{two_way}; found beside date and keys: {shown(rest) or 'none'}; "
        'map it with columns = { name_in_file = "value" }, or name the key that runs along the columns with spread'
    )


def long_rows(source: Source, cells: pd.DataFrame, layout: Layout) -> tuple[pd.DataFrame, tuple[str, ...]]:
    """One row a date and series: file, row, the keys as categories of their codes, and the values; and the keys."""
    repeat = len(layout.wide) or 1
    frame = pd.DataFrame({"row": np.repeat(cells.index.to_numpy(), repeat)})
    frame.insert(0, "file", pd.Series(_one_code(source.file, len(frame))))
    columns = {key: _key_column(source, cells, (key, name), repeat) for key, name in layout.keys.items()}
    columns |= _along(layout, len(cells))
    columns |= {
        key: _one_code(_code(f"{source.file}: the study's {key}", key, code), len(frame))
        for key, code in _constants(source).items()
    }
    keys = tuple(key for key in KEYS if key in columns)
    for key in keys:
        frame[key] = columns[key]
    if layout.wide:
        frame["value"] = read_numbers(source, cells[list(layout.wide)]).ravel()
        return frame, keys
    numbers = read_numbers(source, cells[list(layout.values.values())])
    for at, name in enumerate(layout.values):
        frame[name] = numbers[:, at]
    return frame, keys


def _constants(source: Source) -> dict[str, str]:
    return {**source.constants, **({"tenor": source.tenor.canonical} if source.tenor else {})}


def _one_code(code: str, count: int) -> Codes:
    return pd.Categorical.from_codes(np.zeros(count, dtype=np.int8), pd.Index([code]))


def _key_column(source: Source, cells: pd.DataFrame, column: tuple[str, str], repeat: int) -> Codes:
    key, name = column
    at, texts = pd.factorize(cells[name].to_numpy(dtype=object))
    codes = []
    for number, text in enumerate(texts):
        place = f"{source.file}: row {cells.index[int(np.argmax(at == number))]}, column {name!r}"
        codes.append(_code(place, key, text.strip()))
    return _category(codes, np.repeat(at, repeat))


def _along(layout: Layout, rows: int) -> dict[str, Codes]:
    """Keys that run along the columns of a wide file."""
    series = list(layout.wide.values())
    at = np.tile(np.arange(len(series)), rows)
    return {key: _category([codes[key] for codes in series], at) for key in (series[0] if series else {})}


def _category(codes: Iterable[str], at: Ints) -> Codes:
    """Codes as categories in sorted order; `at` says which of the codes each row has."""
    listed = list(codes)
    place = {code: number for number, code in enumerate(sorted(set(listed)))}
    return pd.Categorical.from_codes(np.array([place[code] for code in listed])[at], pd.Index(list(place)))


def _code(place: str, key: str, text: str) -> str:
    """A code as written, or a length of time in its canonical form."""
    if text == "":
        raise DataError(f"{place} is empty; every value needs its {key}")
    if key not in LENGTHS:
        return text
    try:
        length = parse_tenor(text)
    except ValueError as refused:
        raise DataError(f"{place}: {key} {refused}") from None
    if not length.months and not length.days:
        raise DataError(f"{place}: {key} {text!r} is no length of time above zero; write such as 12m")
    return length.canonical
