"""Number cells: plain decimals with a declared decimal sign; anything else is refused with its row and column."""

from __future__ import annotations

import re

import numpy as np
import pandas as pd

from carrylab.data.calendar import Floats
from carrylab.errors import DataError
from carrylab.options import Source

NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?")


def read_numbers(source: Source, cells: pd.DataFrame) -> Floats:
    """All cells (rows, columns) as numbers, NaN for an empty cell or a listed missing mark."""
    text = cells.to_numpy(dtype=object)
    plain = text if source.decimal == "." else np.where(text == "", "", _swapped(source, cells))
    for mark in source.missing:
        plain = np.where(text == mark, "", plain)
    try:
        values = np.where(plain == "", "nan", plain).astype(np.float64)
    except ValueError:
        values = np.array([[_number(source, cells, plain, r, c) for c in range(plain.shape[1])] for r in range(len(plain))])
    if np.isinf(values).any() or (np.isnan(values) & (plain != "")).any():
        r, c = np.argwhere(np.isinf(values) | (np.isnan(values) & (plain != "")))[0]
        raise DataError(f"{_place(source, cells, r, c)}: {text[r, c]!r} is no finite number")
    return values


def _swapped(source: Source, cells: pd.DataFrame) -> np.ndarray:
    text = cells.to_numpy(dtype=object)
    for r, c in np.argwhere(np.vectorize(lambda cell: "." in cell)(text)):
        raise DataError(
            f'{_place(source, cells, r, c)}: {text[r, c]!r} holds a point, but decimal = "," is declared; a column has '
            "one decimal sign and no thousands marks"
        )
    return np.asarray(np.vectorize(lambda cell: cell.replace(",", "."))(text), dtype=object)


def _number(source: Source, cells: pd.DataFrame, plain: np.ndarray, r: int, c: int) -> float:
    cell = str(plain[r, c]).strip().replace("\N{MINUS SIGN}", "-")
    if cell == "":
        return np.nan
    if NUMBER.fullmatch(cell):
        return float(cell)
    seen = cells.iat[r, c]
    if re.fullmatch(r"[+-]?\d+,\d+", str(seen)):
        raise DataError(
            f'{_place(source, cells, r, c)}: {seen!r} holds a comma; one decimal sign a file, declare decimal = "," where '
            "it is the comma"
        )
    raise DataError(
        f"{_place(source, cells, r, c)}: {seen!r} is no number; allowed are numbers such as -1.25 and empty cells; list "
        f'a mark for missing under missing = ["{seen}"]'
    )


def _place(source: Source, cells: pd.DataFrame, r: int, c: int) -> str:
    return f"{source.file}: row {cells.index[r]}, column {cells.columns[c]}"
