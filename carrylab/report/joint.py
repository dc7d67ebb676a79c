"""Joint hypotheses of a study in one table: over horizons, over markets, and over everything."""

from __future__ import annotations

import math
from collections.abc import Hashable, Iterator
from typing import Any

import pandas as pd

from carrylab.report.table import Line, Table, count_cell, p_cell, word_cell

SHOWN = ("all horizons", "all markets", "everything", "all of the market")
READ_AS = (
    "Restrictions after redundant ones are dropped. One lag, or one number of cosines, for each joint system: that of "
    "the largest overlap in it. Draws under the null come first where they were made, then stacked one-period errors "
    "(1B), which hold where bias is below .3 standard errors; equality, and what neither can carry, takes cosines with "
    "F (fallback where it stands in for them)."
)
ONE_FACT = (
    "With two legs, that nothing is paid and that all comes true are one fact, not two: the legs add up to the spread, "
    "so the errors of their slopes are the same, and each such parity counts once."
)


def joint_tables(findings: pd.DataFrame) -> Iterator[Table | str]:
    """The table of joint tests beyond the groups of one parity; none where a study has a single column."""
    rows = findings[(findings["section"] == "joint") & findings["group"].isin(SHOWN)]
    if len(rows):
        yield Table(
            title="Premium shares held together",
            head=("restrictions", "p", "law", "errors"),
            lines=tuple(_lines(rows)),
            notes=(READ_AS, *_notes(rows)),
            corner="premium shares",
        )
    if _has_two_legs(findings):
        yield ONE_FACT


def _lines(rows: pd.DataFrame) -> Iterator[Line]:
    """A heading for each set of shares, and its hypotheses beneath."""
    for place, own in rows.groupby(["group", "market", "parity", "horizon"], sort=False):
        group, *names = (str(part) for part in place)
        yield Line(": ".join(part for part in (group, ", ".join(name for name in names if name)) if part), heading=True)
        for row in own.to_dict("records"):
            yield _line(row)


def _line(row: dict[Hashable, Any]) -> Line:
    words = "all zero" if str(row["term"]).startswith("all premium shares zero") else "all equal"
    law, errors = "", "not tested"
    if not math.isnan(row["p_value"]):
        law, errors = _how(str(row["method"]))
    mark = ", fallback" if row["rank"] == "fallback" else ""
    return Line(words, (count_cell(row["estimate"]), p_cell(row["p_value"]), word_cell(law), word_cell(errors + mark)))


def _how(method: str) -> tuple[str, str]:
    """Law and errors of a joint test in a word each."""
    if method.startswith("draws"):
        return "", "draws"
    law, _, rest = method.partition(" from ")
    if "1B" in rest:
        return law, "1B"
    if rest:
        return law, rest.partition(" equal-weighted")[0] + " cosines"
    law, _, lag = method.rpartition(", ")
    return law, lag


def _notes(rows: pd.DataFrame) -> list[str]:
    said = []
    for row in rows[rows["note"] != ""].to_dict("records"):
        place = ", ".join(str(row[key]) for key in ("group", "market", "parity", "horizon") if row[key])
        said.append(f"{place[:1].upper()}{place[1:]}: {row['note']}.")
    return list(dict.fromkeys(said))


def _has_two_legs(findings: pd.DataFrame) -> bool:
    slopes = findings[(findings["section"] == "shares") & (findings["term"] == "signal") & findings["weight"].notna()]
    legs = slopes[slopes["rank"] == "headline"].groupby(["market", "parity"])["leg"].nunique()
    return bool((legs == 2).any())
