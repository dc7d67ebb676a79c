"""The slope's static, dynamic and common parts in one table a market, parity and horizon."""

from __future__ import annotations

import math
from collections.abc import Iterator

import pandas as pd

from carrylab.report.table import Cell, Line, Table, error_cell, number_cell, p_cell, percent_cell

PARTS = ("static", "dynamic", "common")
READ_AS = (
    "Static: an entity's standing spread against the others'; dynamic: what is left of a spread once its own mean and "
    "the date's mean are out; common: all entities together. The pooled slope without effects is the mean of the three "
    "by their shares of variance; on a balanced panel entity effects leave dynamic and common, time effects static and "
    "dynamic. Entities are taken as given. Errors in parentheses: equal-weighted cosines."
)
WITH_BASE = (
    "With the home currency as one more entity of zeros, static and dynamic parts are the same whatever the home "
    "currency; the common part is the home currency against all, and depends on it."
)


def part_tables(findings: pd.DataFrame) -> Iterator[Table]:
    """One table for each place with rows of section `parts`."""
    rows = findings[findings["section"] == "parts"]
    for key, own in rows.groupby(["market", "parity", "horizon", "sample"], sort=False):
        market, parity, horizon, sample = (str(part) for part in key)
        based = "" if sample == "all" else f", {sample}"
        legs = [str(leg) for leg in own["leg"].unique() if leg]
        yield Table(
            title=f"{market}: {parity}, {horizon}, parts of the slope{based}",
            head=("variance, %", *legs),
            lines=tuple(_lines(own, legs)),
            notes=(READ_AS if sample == "all" else WITH_BASE, *_unbalanced(own)),
            corner="slopes",
        )


def _lines(rows: pd.DataFrame, legs: list[str]) -> Iterator[Line]:
    found = {(str(row["leg"]), str(row["term"])): row for row in rows.to_dict("records")}

    def number(leg: str, term: str, field: str) -> float:
        return float(found[leg, term][field]) if (leg, term) in found else math.nan

    for part in PARTS:
        share = percent_cell(number("", f"{part}, share of variance", "estimate"), 0)
        yield Line(part, (share, *(number_cell(number(leg, part, "estimate")) for leg in legs)))
        yield Line("", (Cell(), *(error_cell(number(leg, part, "std_error")) for leg in legs)))
    pooled = (number_cell(number(leg, "pooled, no effects", "estimate")) for leg in legs)
    yield Line("pooled, no effects", (percent_cell(1.0, 0), *pooled))
    equal = (p_cell(number(leg, "all parts equal", "p_value")) for leg in legs)
    yield Line("p, all parts equal", (Cell(), *equal))


def _unbalanced(rows: pd.DataFrame) -> list[str]:
    notes = rows.loc[rows["term"].str.endswith("share of variance") & (rows["note"] != ""), "note"].unique()
    return [f"{str(note).capitalize()}." for note in notes]
