"""Since when: windows, named periods, a break, and the years that carry the result."""

from __future__ import annotations

import math
from collections.abc import Hashable, Iterator
from typing import Any

import numpy as np
import pandas as pd

from carrylab.report.numbers import fixed, p_value
from carrylab.report.table import Line, Table, count_cell, doubts, error_cell, number_cell, p_cell, word_cell

Record = dict[Hashable, Any]
MOST_LINES, MOST_YEARS = 12, 3
OWN_ERRORS = (
    "Each line has effects and errors of its own, made as the headline's. Windows share dates, so their lines are not "
    "independent."
)


def window_tables(findings: pd.DataFrame) -> Iterator[Table | str]:
    """Tables of windows and periods, then one sentence a break and the years that move the slope most."""
    for section, title in (("windows", "windows"), ("periods", "named periods")):
        rows = findings[(findings["section"] == section) & ~findings["sample"].str.endswith("every period")]
        for key, own in rows.groupby(["market", "parity", "horizon"], sort=False):
            yield _table(f"{', '.join(str(part) for part in key)}: {title}", own)
    yield from _breaks(findings[findings["section"] == "breaks"])
    yield from _years(findings)


def _table(title: str, rows: pd.DataFrame) -> Table:
    slopes = rows[rows["term"] == "signal"]
    legs = [str(leg) for leg in slopes["leg"].unique() if leg]
    samples = list(dict.fromkeys(slopes["sample"]))
    shown = sorted(set(np.linspace(0, len(samples) - 1, MOST_LINES).round().astype(int).tolist()))
    lines: list[Line] = []
    for at in shown:
        lines += _lines(samples[at], rows[rows["sample"] == samples[at]].to_dict("records"), legs)
    left_out = len(samples) - len(shown)
    more = [f"{len(shown)} of {len(samples)} windows; all are in findings.csv."] if left_out else []
    return Table(
        title=title,
        head=(*(name for leg in legs for name in (leg, "R2")), "p, nothing paid", "dates"),
        lines=tuple(lines),
        notes=(*_said(slopes), OWN_ERRORS, *more, *_equal(rows), *doubts(rows["note"])),
        corner="sample",
        unit=2,
    )


def _find(records: list[Record], term: str, leg: str | None = None) -> Record:
    found = (row for row in records if row["term"] == term and (leg is None or row["leg"] == leg))
    empty: Record = dict.fromkeys(("estimate", "std_error", "r2", "p_value", "n_dates"), math.nan)
    return next(found, empty | {"note": ""})


def _lines(sample: str, records: list[Record], legs: list[str]) -> Iterator[Line]:
    found = [_find(records, "signal", leg) for leg in legs]
    paid = _find(records, "nothing paid")
    upper = [cell for row in found for cell in (number_cell(row["estimate"]), number_cell(row["r2"], 3))]
    yield Line(sample, (*upper, p_cell(paid["p_value"], str(paid["note"])), count_cell(found[0]["n_dates"])))
    lower = [cell for row in found for cell in (error_cell(row["std_error"]), word_cell(""))]
    yield Line("", (*lower, word_cell(""), word_cell("")))


def _said(slopes: pd.DataFrame) -> Iterator[str]:
    """How often the interval of the premium lay above zero."""
    paid = slopes[(slopes["role"] == "return") & slopes["lower"].notna()]
    if len(paid) > 1:
        above = int((paid["lower"] > 0).sum())
        yield (
            f"The premium's interval lies above zero in {above} of {len(paid)} samples; its slope runs from "
            f"{fixed(paid['estimate'].min())} to {fixed(paid['estimate'].max())}."
        )


def _equal(rows: pd.DataFrame) -> Iterator[str]:
    for row in rows[rows["term"].str.startswith("equal in")].to_dict("records"):
        said = row["note"] if math.isnan(row["p_value"]) else f"p {p_value(row['p_value'])}, {row['method']}"
        yield f"{str(row['leg']).capitalize()} {row['term']}: {said}."


def _breaks(rows: pd.DataFrame) -> Iterator[str]:
    for row in rows.to_dict("records"):
        place = f"{row['market']}, {row['parity']}, {row['horizon']}, one break in the {row['term']} of {row['leg']}"
        if math.isnan(row["p_value"]):
            yield f"{place}: {row['note']}."
            continue
        yield (
            f"{place}: largest Wald {fixed(row['statistic'])} ({row['df']:.0f}), p {p_value(row['p_value'])}; "
            f"{row['note']}; {row['method']}."
        )


def _years(findings: pd.DataFrame) -> Iterator[str]:
    """The years whose absence moves the slope most."""
    rows = findings[findings["section"] == "years"]
    whole = findings[(findings["section"] == "shares") & (findings["rank"] == "headline")]
    whole = whole[(whole["term"] == "signal") & (whole["role"] == "return") & (whole["group"] == "pooled")]
    slopes = {
        (row["market"], row["parity"], row["horizon"]): float(row["estimate"]) for row in whole.to_dict("records")
    }
    for key, own in rows.groupby(["market", "parity", "horizon"], sort=False):
        slope = slopes[key[0], key[1], key[2]]
        moved = (own["estimate"] - slope).abs().sort_values(ascending=False, kind="stable")
        top = own.loc[moved.index[:MOST_YEARS]]
        listed = "; ".join(f"{row['sample']} {fixed(row['estimate'])}" for row in top.to_dict("records"))
        yield f"{', '.join(str(part) for part in key)}: slope {fixed(slope)}, {listed}."
