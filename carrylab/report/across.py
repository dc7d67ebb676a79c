"""The matrix of all signals against all markets' returns, with fitted premia and the test of one factor."""

from __future__ import annotations

import math
from collections.abc import Iterator

import pandas as pd

from carrylab.report.numbers import fixed, in_parentheses, p_value
from carrylab.report.table import Line, Table, error_cell, number_cell, p_cell

READ_AS = (
    "Market averages: each line one market's mean signal, each column the mean excess return of a market; errors in "
    "parentheses. Signals are in units of their own, so compare R2 and p along a column. Adjusted p: over all cells "
    "(Holm 1979)."
)


def across_tables(findings: pd.DataFrame) -> Iterator[Table | str]:
    """One matrix for each horizon at which markets can be held against each other."""
    rows = findings[findings["section"] == "across"]
    for horizon, own in rows.groupby("horizon", sort=False):
        cells = own[(own["term"] == "signal") & own["estimate"].notna()]
        if cells.empty:
            yield f"Across markets, {horizon}: {own['note'].iloc[0]}."
            continue
        markets = list(dict.fromkeys(cells["market"]))
        lines = [line for name in markets for line in _lines(name, cells[cells["market"] == name], markets)]
        yield Table(
            title=f"Across markets, {horizon}: every signal against every return",
            head=tuple(f"return of {name}" for name in markets),
            lines=tuple(lines),
            notes=(READ_AS, *_methods(cells), *_premia(own), *_factor(own)),
            corner="signal of",
        )


def _lines(name: str, rows: pd.DataFrame, markets: list[str]) -> Iterator[Line]:
    by_leg = {str(row["leg"]): row for row in rows.to_dict("records")}
    found = [by_leg[market] for market in markets]
    yield Line(name, tuple(number_cell(row["estimate"]) for row in found))
    yield Line("", tuple(error_cell(row["std_error"]) for row in found))
    yield Line("  R2", tuple(number_cell(row["r2"], 3) for row in found))
    yield Line("  p", tuple(p_cell(row["p_value"]) for row in found))
    yield Line("  p, adjusted", tuple(p_cell(row["p_holm"]) for row in found))


def _methods(rows: pd.DataFrame) -> list[str]:
    found = [str(text) for text in dict.fromkeys(rows["method"])]
    return [f"{text[:1].upper()}{text[1:]}." for text in found]


def _premia(rows: pd.DataFrame) -> list[str]:
    pairs = rows[rows["term"] == "correlation of fitted premia"].to_dict("records")
    said = "; ".join(f"{row['market']} and {row['leg']} {fixed(row['estimate'])}" for row in pairs)
    return [f"Correlation of fitted premia: {said}."] if said else []


def _factor(rows: pd.DataFrame) -> list[str]:
    said = []
    for row in rows[rows["term"] == "one factor carries all premia"].to_dict("records"):
        result = row["note"] if math.isnan(row["p_value"]) else f"p {p_value(row['p_value'])}, {row['method']}"
        said.append(f"One factor carries all premia: {result}.")
    loadings = rows[rows["term"] == "loading on one factor"].to_dict("records")
    listed = "; ".join(
        f"{row['market']} {fixed(row['estimate'])} {in_parentheses(row['std_error'])}" for row in loadings
    )
    return [*said, f"Loadings on it, mean one: {listed}."] if listed else said
