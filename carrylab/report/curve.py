"""What the rest of the curve adds beside the signal, one table a market and horizon."""

from __future__ import annotations

import math
from collections.abc import Hashable, Iterator
from typing import Any

import pandas as pd

from carrylab.report.numbers import fixed, in_parentheses, p_value
from carrylab.report.table import Line, Table, count_cell, number_cell, p_cell

Record = dict[Hashable, Any]
READ_AS = (
    "Each maturity's excess return on its own signal, with components of the curve beside it, and on all forward rates "
    "at once. R2 within the effects. Loading: of each maturity on one combination of the forward rates, mean one."
)


def curve_tables(findings: pd.DataFrame) -> Iterator[Table]:
    """One table for each place with rows of section `curve`."""
    rows = findings[findings["section"] == "curve"]
    for key, own in rows.groupby(["market", "parity", "horizon"], sort=False):
        maturities = [str(group) for group in own["group"].unique() if group != "pooled"]
        lines = tuple(_line(name, own[own["group"] == name].to_dict("records")) for name in maturities)
        yield Table(
            title=f"{', '.join(str(part) for part in key)}: the rest of the curve",
            head=("R2, signal", "R2 added", "p, nothing added", "R2, forwards", "loading", "obs."),
            lines=lines,
            notes=(READ_AS, *_notes(own)),
            corner="maturity",
        )


def _line(name: str, records: list[Record]) -> Line:
    by_term = {str(row["term"]): row for row in records}

    def of(term: str, field: str = "estimate") -> float:
        return float(by_term[term][field]) if term in by_term else math.nan

    cells = (
        number_cell(of("R2 of the signal alone"), 3),
        number_cell(of("R2 added"), 3),
        p_cell(of("components add nothing", "p_value")),
        number_cell(of("R2 of all forward rates"), 3),
        number_cell(of("loading on one combination")),
        count_cell(of("R2 added", "n_obs")),
    )
    return Line(name, cells)


def _notes(rows: pd.DataFrame) -> Iterator[str]:
    shares = rows[rows["term"].str.endswith("share of variance")].to_dict("records")
    if shares:
        listed = ", ".join(fixed(100 * row["estimate"], 1) for row in shares)
        yield f"Components carry {listed} percent of the curve's variance."
    loadings = rows[rows["term"] == "loading on one combination"].to_dict("records")
    if loadings:
        listed = "; ".join(f"{row['group']} {_with_error(row)}" for row in loadings)
        yield f"Loadings: {listed}."
    weights = rows[(rows["group"] == "pooled") & rows["term"].str.startswith(("yield ", "forward "))].to_dict("records")
    if weights:
        listed = "; ".join(f"{row['term']} {_with_error(row)}" for row in weights)
        yield f"The combination: {listed}."
    for row in rows[rows["term"] == "one combination for all maturities"].to_dict("records"):
        found = "" if math.isnan(row["p_value"]) else f"p {p_value(row['p_value'])}, {row['method']}; "
        yield f"One combination for all maturities: {found}{row['note']}."
    for row in rows[(rows["term"] == "components add nothing") & rows["p_value"].isna()].to_dict("records"):
        yield f"{row['group']}: {row['note']}."


def _with_error(row: Record) -> str:
    return f"{fixed(row['estimate'])} {in_parentheses(row['std_error'])}"
