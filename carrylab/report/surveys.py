"""What a survey of the fundamental makes of the premium, one table a market, parity and horizon."""

from __future__ import annotations

import math
from collections.abc import Iterator

import pandas as pd

from carrylab.report.table import Line, Table, count_cell, doubts, error_cell, number_cell, p_cell, word_cell

READ_AS = (
    "Slopes on the signal, weighted. Required premium and forecast error add up to what is paid as excess return; "
    "required premium and expected fundamental add up to one where there are no other legs (Froot and Frankel 1989). A "
    "forecast error away from zero says that the survey is biased or leaves the signal aside. Errors in parentheses."
)


def survey_tables(findings: pd.DataFrame) -> Iterator[Table | str]:
    """One table for each survey, or the sentence that says why it could not be used."""
    rows = findings[findings["section"] == "surveys"]
    for key, own in rows.groupby(["market", "parity", "horizon", "leg"], sort=False):
        market, parity, horizon, leg = (str(part) for part in key)
        refused = own[own["estimate"].isna()]
        if len(refused):
            yield f"{market}, {parity}, {horizon}, survey of {leg}: {refused['note'].iloc[0]}."
            continue
        yield Table(
            title=f"{market}: {parity}, {horizon}, survey of {leg}",
            head=("slope", "null", "p", "R2", "obs."),
            lines=tuple(_lines(own)),
            notes=(READ_AS, *doubts(own["note"])),
            corner="part",
        )


def _lines(rows: pd.DataFrame) -> Iterator[Line]:
    for row in rows.to_dict("records"):
        null = "" if math.isnan(row["null"]) else f"{row['null']:g}"
        cells = (number_cell(row["estimate"]), word_cell(null), p_cell(row["p_value"]), number_cell(row["r2"], 3))
        yield Line(str(row["term"]), (*cells, count_cell(row["n_obs"])))
        yield Line("", (error_cell(row["std_error"]),) + (word_cell(""),) * 4)
