"""Number cells: plain decimals with a declared decimal sign; anything else is refused with its row and column."""

from __future__ import annotations

import re
from typing import NoReturn

import numpy as np
import numpy.typing as npt
import pandas as pd

from carrylab.data.calendar import Floats
from carrylab.errors import DataError
from carrylab.options import Source

NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?")
OTHER = {".": ",", ",": "."}
Texts = npt.NDArray[np.object_]


def read_numbers(source: Source, cells: pd.DataFrame) -> Floats:
    """All cells (rows, columns) as numbers, NaN for an empty cell or a listed missing mark."""
    text = cells.to_numpy(dtype=object)
    holes = text == ""
    for mark in source.missing:
        holes |= text == mark
    plain = np.where(holes, "nan", text)
    if source.decimal == ",":
        plain = _pointed(source, cells, plain)
    values = _all_at_once(plain)
    if values is None or (np.isinf(values) | (np.isnan(values) & ~holes)).any():
        return _one_by_one(source, cells, plain, holes)
    return values


def _all_at_once(plain: Texts) -> Floats | None:
    """Numbers of cells that are plain, None where one is not: Python's own reading allows 1_000."""
    if "_" in "".join(plain.ravel()):
        return None
    try:
        return plain.astype(np.float64)
    except ValueError:
        return None


def _pointed(source: Source, cells: pd.DataFrame, plain: Texts) -> Texts:
    """Decimal commas as points; a point is refused, for a file has one decimal sign and no thousands marks."""
    flat = plain.ravel()
    if "." in "".join(flat):
        at = next(number for number, cell in enumerate(flat) if "." in cell)
        _refuse(source, cells, divmod(at, plain.shape[1]))
    return np.array([cell.replace(",", ".") for cell in flat], dtype=object).reshape(plain.shape)


def _one_by_one(source: Source, cells: pd.DataFrame, plain: Texts, holes: npt.NDArray[np.bool_]) -> Floats:
    """Cells with spaces around them or a typographic minus are read, the first that is no number is refused."""
    values = np.full(plain.shape, np.nan)
    for r, c in np.argwhere(~holes):
        cell = plain[r, c].strip().replace("\N{MINUS SIGN}", "-")
        if cell == "":
            continue
        if not NUMBER.fullmatch(cell) or np.isinf(float(cell)):
            _refuse(source, cells, (r, c))
        values[r, c] = float(cell)
    return values


def _refuse(source: Source, cells: pd.DataFrame, at: tuple[int, int]) -> NoReturn:
    seen = str(cells.iloc[at])
    place = f"{source.file}: row {cells.index[at[0]]}, column {cells.columns[at[1]]!r}: {seen!r}"
    other = OTHER[source.decimal]
    if re.fullmatch(rf"\s*[+-]?\d*\{other}\d+\s*", seen):
        raise DataError(
            f"{place} has the decimal sign {other!r}, but {source.decimal!r} holds in this file; allowed is one sign, "
            f'declared with decimal = "{other}" or "{source.decimal}", and no thousands marks'
        )
    raise DataError(
        f"{place} is no number; allowed are numbers such as -1{source.decimal}25 without thousands marks, and empty "
        f'cells; a mark for a missing value must be listed: missing = ["{seen.strip()}"]'
    )
