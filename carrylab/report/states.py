"""Shares by state beside each other, and every spell of a state with what followed its start."""

from __future__ import annotations

import math
from collections.abc import Hashable, Iterator
from typing import Any

import pandas as pd

from carrylab.report.numbers import p_value
from carrylab.report.table import (
    Cell,
    Line,
    Table,
    count_cell,
    doubts,
    error_cell,
    number_cell,
    p_cell,
    percent_cell,
    word_cell,
)

Record = dict[Hashable, Any]
MOST_SPELLS = 12
ORIGINS = (
    "A state is that of the origin date; the regression in each state has effects and errors of its own. Part of "
    "summed excess return: over the horizons that start in the state."
)
FOLLOWED = (
    "Means over entities: the signal at the start of a spell, and what followed over the horizon from that date. Taken "
    "by: the leg with the largest weighted part of the signal."
)


def state_tables(findings: pd.DataFrame) -> Iterator[Table]:
    """One table a market, parity and horizon, a column for every state; then its spells."""
    for key, rows in findings[findings["section"] == "states"].groupby(["market", "parity", "horizon"], sort=False):
        yield _by_state(", ".join(str(part) for part in key), rows)
    spells = findings[findings["section"] == "timeline"]
    for key, rows in spells.groupby(["market", "parity", "horizon"], sort=False):
        yield _timeline(", ".join(str(part) for part in key), rows)


def _by_state(place: str, rows: pd.DataFrame) -> Table:
    own = rows[~rows["term"].str.startswith("equal in all states")]
    columns = {str(sample): part.to_dict("records") for sample, part in own.groupby("sample", sort=False)}
    legs = own.loc[(own["term"] == "signal") & (own["leg"] != ""), ["leg", "role"]].drop_duplicates()
    lines: list[Line] = []
    for leg in legs["leg"]:
        lines += _leg_lines(columns, str(leg))
    lines += [
        Line("p, nothing paid", tuple(_p(found, "nothing paid") for found in columns.values())),
        Line("p, all paid", tuple(_p(found, "all paid") for found in columns.values())),
        Line("mean excess return, %", tuple(percent_cell(_of(f, "mean excess return")) for f in columns.values())),
        Line("", tuple(_percent_error(_of(f, "mean excess return", "std_error")) for f in columns.values())),
        Line(
            "part of summed excess return, %",
            tuple(percent_cell(_of(f, "part of summed excess return"), 0) for f in columns.values()),
        ),
        Line(
            "part of observations, %", tuple(percent_cell(_of(f, "part of observations"), 0) for f in columns.values())
        ),
        Line("dates", tuple(count_cell(_of(f, "part of observations", "n_dates")) for f in columns.values())),
    ]
    notes = (ORIGINS, *_equal_notes(rows), *doubts(own["note"]), *_other_notes(own))
    return Table(f"{place}: by state", tuple(columns), tuple(lines), notes, corner="slopes")


def _leg_lines(columns: dict[str, list[Record]], leg: str) -> Iterator[Line]:
    yield Line(leg, tuple(number_cell(_of(found, "signal", leg=leg)) for found in columns.values()))
    yield Line("", tuple(error_cell(_of(found, "signal", "std_error", leg=leg)) for found in columns.values()))
    yield Line("  R2", tuple(number_cell(_of(found, "signal", "r2", leg=leg), 3) for found in columns.values()))


def _find(records: list[Record], term: str, leg: str | None = None) -> Record | None:
    return next((row for row in records if row["term"] == term and (leg is None or row["leg"] == leg)), None)


def _of(records: list[Record], term: str, field: str = "estimate", *, leg: str | None = None) -> float:
    found = _find(records, term, leg)
    return math.nan if found is None else float(found[field])


def _p(records: list[Record], term: str) -> Cell:
    found = _find(records, term)
    return Cell() if found is None else p_cell(float(found["p_value"]), str(found["note"]))


def _percent_error(value: float) -> Cell:
    return error_cell(100 * value)


def _equal_notes(rows: pd.DataFrame) -> Iterator[str]:
    for row in rows[rows["term"].str.startswith("equal in all states")].to_dict("records"):
        said = row["note"] if math.isnan(row["p_value"]) else f"p {p_value(row['p_value'])}, {row['method']}"
        yield f"{str(row['leg']).capitalize()} {row['term']}: {said}."


def _other_notes(rows: pd.DataFrame) -> Iterator[str]:
    late = rows[(rows["term"] == "part of observations") & (rows["note"] != "")]
    for note, found in late.groupby("note", sort=False):
        yield f"{', '.join(found['sample'])}: {note}."
    for row in rows[rows["note"].str.startswith("too few dates")].to_dict("records"):
        yield f"{row['sample']}: {row['note']}."


def _timeline(place: str, rows: pd.DataFrame) -> Table:
    """The longest spells in order of time, with the signal at the start and every leg."""
    lengths = rows.drop_duplicates("sample").set_index("sample")["n_dates"]
    shown = set(lengths.sort_values(ascending=False, kind="stable").index[:MOST_SPELLS])
    legs = [str(leg) for leg in rows.loc[rows["term"] == "what followed", "leg"].unique()]
    lines = [
        _spell(str(sample), found.to_dict("records"), legs)
        for sample, found in rows.groupby("sample", sort=False)
        if sample in shown
    ]
    more = len(lengths) - len(shown)
    left_out = [f"The {MOST_SPELLS} longest spells; {more} more are in findings.csv, section timeline."] if more else []
    return Table(
        f"{place}: spells of states and what followed",
        ("from", "until", "periods", "signal", *legs, "taken by"),
        tuple(lines),
        (FOLLOWED, *left_out),
        corner="state",
    )


def _spell(sample: str, records: list[Record], legs: list[str]) -> Line:
    first = records[0]
    taken = _find(records, "taken by")
    return Line(
        sample.rpartition(", ")[0],
        (
            word_cell(str(first["first"])),
            word_cell(str(first["last"])),
            count_cell(float(first["n_dates"])),
            number_cell(_of(records, "signal at start"), 3),
            *(number_cell(_of(records, "what followed", leg=leg), 3) for leg in legs),
            word_cell("" if taken is None else str(taken["leg"])),
        ),
    )
