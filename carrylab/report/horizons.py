"""Slopes horizon by horizon, with the band that holds at all of them and what chance alone gives."""

from __future__ import annotations

import math
from collections.abc import Hashable, Iterator
from typing import Any

import numpy as np
import pandas as pd

from carrylab.report.numbers import fixed, p_value
from carrylab.report.table import Cell, Line, Table, count_cell, doubts, error_cell, interval_cell, number_cell, p_cell

Record = dict[Hashable, Any]
MOST_LINES = 12
HALF = "expectation share passes one half"
ALL_AT_ONCE = "signal, all horizons at once"
BANDS = (
    "Errors in parentheses. In brackets, for the return leg: the band that holds at all horizons at once (sup-t, "
    "Montiel Olea and Plagborg-Moller 2019). R2 rises with the horizon under the null too: by chance is its 95th "
    "percentile in draws in which nothing predicts."
)


def horizon_tables(findings: pd.DataFrame) -> Iterator[Table]:
    """One table a market and parity, and one more for a common sample."""
    rows = findings[findings["section"] == "horizons"]
    for key, own in rows.groupby(["market", "parity", "sample"], sort=False):
        market, parity, sample = (str(part) for part in key)
        if not (own["term"] == "signal").any():
            continue
        title = f"{market}: {parity}, by horizon" + ("" if sample == "all" else f", {sample}")
        yield _table(title, own)


def _table(title: str, rows: pd.DataFrame) -> Table:
    slopes = rows[rows["term"] == "signal"]
    legs = list(slopes[["leg", "role"]].drop_duplicates().itertuples(index=False, name=None))
    paid = next((str(leg) for leg, role in legs if role == "return"), "")
    horizons = list(dict.fromkeys(slopes["horizon"]))
    shown = sorted(set(np.linspace(0, len(horizons) - 1, MOST_LINES).round().astype(int).tolist()))
    lines: list[Line] = []
    for at in shown:
        own = rows[rows["horizon"] == horizons[at]]
        lines += _lines(horizons[at], own.to_dict("records"), [str(leg) for leg, _ in legs], paid)
    end = ("R2 by chance", "p, nothing paid", "p, by draws", "obs.")
    return Table(
        title=title,
        head=(*(name for leg, _ in legs for name in (str(leg), "R2")), *end),
        lines=tuple(lines),
        notes=(*_said(rows, paid), BANDS, *_left_out(rows, horizons, shown), *doubts(slopes["note"])),
        corner="horizon",
        unit=2,
    )


def _find(records: list[Record], term: str, leg: str | None = None) -> Record:
    found = (row for row in records if row["term"] == term and (leg is None or row["leg"] == leg))
    return next(found, {"estimate": math.nan, "p_value": math.nan, "lower": math.nan, "upper": math.nan, "note": ""})


def _lines(horizon: str, records: list[Record], legs: list[str], paid: str) -> Iterator[Line]:
    slopes = [_find(records, "signal", leg) for leg in legs]
    tests = (
        number_cell(_find(records, "R2 by chance")["estimate"], 3),
        p_cell(_find(records, "nothing paid")["p_value"], _find(records, "nothing paid")["note"]),
        p_cell(_find(records, "nothing paid, by draws")["p_value"]),
        count_cell(slopes[0]["n_obs"]),
    )
    upper = [cell for row in slopes for cell in (number_cell(row["estimate"]), number_cell(row["r2"], 3))]
    yield Line(horizon, (*upper, *tests))
    yield Line("", (*(cell for row in slopes for cell in (error_cell(row["std_error"]), Cell())), *(Cell(),) * 4))
    band = _find(records, ALL_AT_ONCE, paid)
    bands = (interval_cell(band["lower"], band["upper"]) if leg == paid else Cell() for leg in legs)
    yield Line("", (*(cell for one in bands for cell in (one, Cell())), *(Cell(),) * 4))


def _said(rows: pd.DataFrame, paid: str) -> Iterator[str]:
    """The profile in words: where one half is passed, and the joint tests."""
    for row in rows[rows["term"] == HALF].to_dict("records"):
        share = fixed(row["estimate"])
        if row["note"]:
            yield f"The expectation share does not pass one half: {row['note']} ({share})."
        else:
            yield f"The expectation share passes one half at {row['horizon']} ({share})."
    for row in rows[rows["term"].str.startswith("nothing paid at any horizon")].to_dict("records"):
        said = row["note"] if math.isnan(row["p_value"]) else f"p {p_value(row['p_value'])}, {row['method']}"
        yield f"{paid.capitalize()}, {row['term']}: {said}."


def _left_out(rows: pd.DataFrame, horizons: list[str], shown: list[int]) -> Iterator[str]:
    if len(shown) < len(horizons):
        yield f"{len(shown)} of {len(horizons)} horizons; all of them are in findings.csv, section horizons."
    not_built = rows[rows["term"] == "not built"]
    if len(not_built):
        first = not_built.iloc[0]
        yield f"Not built: {', '.join(not_built['horizon'])}; {first['horizon']}: {first['note']}."
