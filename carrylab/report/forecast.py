"""Out of sample, one table a market, parity and horizon."""

from __future__ import annotations

import math
from collections.abc import Hashable, Iterator
from typing import Any

import pandas as pd

from carrylab.report.numbers import fixed
from carrylab.report.table import Line, Table, count_cell, number_cell, p_cell, percent_cell, word_cell

Record = dict[Hashable, Any]
MEAN, PARITY = "historical mean", "parity's own forecast"
READ_AS = (
    "Forecasts made at each origin with outcomes known by then. R2 in percent: one less squared errors over those of "
    "the historical mean, or of the parity's own forecast (a premium of zero; the fundamental one for one). p: "
    "Clark-West (2007), one-sided, cosines. Weight: of the model when both are combined, zero where it adds nothing."
)
LUCK = (
    "A positive R2 out of sample is no evidence by itself: with nothing to forecast it is positive in about one sample "
    "in four, and above 9 percent in one in twenty at twelve months (our simulations)."
)
COSTS = "The gain is before costs, margin and tax, and says nothing of crashes to come. Not investment advice."


def forecast_tables(findings: pd.DataFrame) -> Iterator[Table | str]:
    """One table for each place with rows of section `forecast`, or why none were made."""
    rows = findings[findings["section"] == "forecast"]
    for key, own in rows.groupby(["market", "parity", "horizon"], sort=False):
        place = ", ".join(str(part) for part in key)
        made = own[own["term"].str.startswith("R2 against")]
        for row in own[own["term"] == "not made"].to_dict("records"):
            yield f"{place}, out of sample: {row['note']}."
        if len(made):
            yield _table(place, own)


def _table(place: str, rows: pd.DataFrame) -> Table:
    pooled = rows[rows["group"] == "pooled"]
    lines = []
    for (scheme, leg), own in pooled[pooled["leg"] != ""].groupby(["sample", "leg"], sort=False):
        lines.append(_line(f"{leg}, {scheme}", own.to_dict("records")))
    return Table(
        title=f"{place}: out of sample",
        head=("R2, mean, %", "p", "weight", "R2, parity, %", "p", "weight", "from", "obs."),
        lines=tuple(lines),
        notes=(READ_AS, *_restricted(pooled), *_gains(pooled), *_entities(rows), LUCK),
        corner="leg",
    )


def _line(label: str, records: list[Record]) -> Line:
    by_term = {str(row["term"]): row for row in records}

    def of(term: str, field: str = "estimate") -> float:
        return float(by_term[term][field]) if term in by_term else math.nan

    cells = [
        cell
        for name in (MEAN, PARITY)
        for cell in (
            percent_cell(of(f"R2 against the {name}"), 1),
            p_cell(of(f"Clark-West against the {name}", "p_value")),
            number_cell(of(f"encompassing against the {name}")),
        )
    ]
    first = records[0]
    return Line(label, (*cells, word_cell(str(first["first"])), count_cell(float(first["n_obs"]))))


def _restricted(rows: pd.DataFrame) -> Iterator[str]:
    for row in rows[rows["term"].str.endswith("sign restricted")].to_dict("records"):
        yield (
            f"{row['sample'].capitalize()}, no falling slope and no premium below zero (Campbell and Thompson 2008): "
            f"R2 {fixed(100 * row['estimate'], 1)} percent against the historical mean."
        )


def _gains(rows: pd.DataFrame) -> Iterator[str]:
    found = rows[rows["term"] == "gain in certainty equivalent"].to_dict("records")
    for row in found:
        note = str(row["note"]).removeprefix("decimal a year, ")
        yield f"{row['sample'].capitalize()}: gain of {fixed(100 * row['estimate'])} percent a year; {note}."
    if found:
        yield COSTS


def _entities(rows: pd.DataFrame) -> Iterator[str]:
    """How many entities of a panel were forecast better than by their mean."""
    own = rows[(rows["group"] != "pooled") & (rows["sample"] == "recursive")]
    if len(own):
        better = int((own["estimate"] > 0).sum())
        yield f"Recursive forecasts beat the entity's own mean in {better} of {len(own)} entities."
