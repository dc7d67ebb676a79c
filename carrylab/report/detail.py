"""Each market on its own: slopes by group, the legs beside each other, the standard error beneath each slope."""

from __future__ import annotations

import math
from collections.abc import Hashable, Iterator
from dataclasses import replace
from typing import Any

import pandas as pd

from carrylab.report.drawn import draw_notes
from carrylab.report.numbers import digits_of, fixed, in_brackets, in_parentheses, p_value
from carrylab.report.table import (
    Cell,
    Line,
    Table,
    count_cell,
    doubts,
    error_cell,
    interval_cell,
    number_cell,
    p_cell,
    percent_cell,
    word_cell,
)

Record = dict[Hashable, Any]
SHOWN_CHECKS = ("error", "warning")


def detail_tables(findings: pd.DataFrame) -> Iterator[Table]:
    """One table a market, parity and horizon."""
    shares = findings[findings["section"] == "shares"]
    joint = findings[(findings["section"] == "joint") & (findings["group"] == "all groups")]
    others = findings[(findings["section"] == "other methods") & (findings["group"] == "pooled")]
    drawn = findings[(findings["section"] == "draws") & (findings["group"] == "pooled")]
    for key, rows in shares.groupby(["market", "parity", "horizon"], sort=False):
        market, parity, horizon = (str(part) for part in key)
        own, there, made = (
            part[(part["market"] == market) & (part["parity"] == parity) & (part["horizon"] == horizon)]
            for part in (joint, others, drawn)
        )
        found = _detail(f"{market}: {parity}, {horizon}, by {rows['interval'].iloc[0]}", rows, own)
        yield replace(found, notes=(*found.notes, *_other_notes(there), *draw_notes(made)))


def _detail(title: str, rows: pd.DataFrame, joint: pd.DataFrame) -> Table:
    headline = rows[(rows["rank"] == "headline") & (rows["sample"] == "all")]
    own_p = not (headline["term"] == "nothing paid").any()
    legs = [str(leg) for leg in headline.loc[headline["term"] == "signal", "leg"].unique()]
    head = [name for leg in legs for name in ((leg, "R2", "p") if own_p else (leg, "R2"))]
    head += ["obs."] if own_p else ["p, nothing paid", "p, all paid", "obs."]
    spans = headline[["first", "last"]].drop_duplicates()
    if len(spans) == 1:
        title = f"{title}, origins {spans['first'].iloc[0]} to {spans['last'].iloc[0]}"
    else:
        head += ["from", "to"]
    by_group: dict[str, list[Record]] = {}
    for record in headline.to_dict("records"):
        by_group.setdefault(str(record["group"]), []).append(record)
    digits = _digits(headline)
    lines: list[Line] = []
    for group in sorted(by_group, key=lambda name: name == "pooled"):
        lines += _group_lines(group, by_group[group], legs, digits)
    shown = slice(0, len(head))
    return Table(
        title=title,
        head=tuple(head),
        lines=tuple(Line(line.label, line.cells[shown]) for line in lines),
        notes=(*_detail_notes(headline), *doubts(headline["note"]), *_resolved_note(rows), *_joint_notes(joint)),
        corner="slopes",
        unit=3 if own_p else 2,
    )


def _digits(rows: pd.DataFrame) -> dict[tuple[str, str], int]:
    """Decimals of each leg and term, the same down a column: two figures of its middling standard error."""
    middle = rows[rows["std_error"] > 0].groupby(["leg", "term"])["std_error"].median()
    return {
        (str(key[0]), str(key[1])): digits_of(float(error)) for key, error in zip(middle.index, middle, strict=True)
    }


def _group_lines(
    group: str, records: list[Record], legs: list[str], digits: dict[tuple[str, str], int]
) -> Iterator[Line]:
    """Slope and error of every leg, the signal first and then each added predictor."""
    at = {(record["leg"], record["term"]): record for record in records}
    p = {record["term"]: record["p_value"] for record in records}
    own_p = "nothing paid" not in p
    first = records[0]
    note = {record["term"]: record["note"] for record in records}
    paid = ("nothing paid", "all paid")
    tests = () if own_p else tuple(p_cell(p.get(term, math.nan), note.get(term, "")) for term in paid)
    end = (*tests, count_cell(first["n_obs"]), word_cell(first["first"]), word_cell(first["last"]))
    blank = (Cell(),) * len(end)
    for term in [term for leg, term in at if leg == legs[0] and term not in ("const", "nothing paid")]:
        signal = term == "signal"
        upper: list[Cell] = []
        lower: list[Cell] = []
        for leg in legs:
            record = at[leg, term]
            shown = digits.get((leg, str(term)), 2)
            upper += [number_cell(record["estimate"], shown), number_cell(record["r2"], 3) if signal else Cell()]
            lower += [error_cell(record["std_error"], shown), Cell()]
            upper += [p_cell(record["p_value"], record["note"])] if own_p else []
            lower += [Cell()] if own_p else []
        yield Line(group if signal else f"  {term}", (*upper, *(end if signal else blank)))
        yield Line("", (*lower, *blank))


def _detail_notes(rows: pd.DataFrame) -> tuple[str, ...]:
    signal = rows[rows["term"] == "signal"]
    nulls = [
        f"{row['leg']} {row['null']:g}"
        for row in signal.drop_duplicates("leg").to_dict("records")
        if not math.isnan(row["null"])
    ]
    effects, _, _ = str(signal["method"].iloc[0]).partition("; ")
    pooled = signal[signal["group"] == "pooled"]
    by_method: dict[str, list[str]] = {}
    for row in pooled.to_dict("records"):
        by_method.setdefault(str(row["method"]).partition("; ")[2], []).append(str(row["leg"]))
    methods = "; ".join(f"{', '.join(legs)}: {method}" for method, legs in by_method.items())
    r2 = "centred" if effects == "no effects" else "within the effects"
    said = [
        f"Slope of each leg on the signal, {effects}; standard errors in parentheses; R2 {r2}. "
        f"Pooled errors: {methods}."
    ]
    if signal.groupby("leg")["method"].nunique().max() > 1:
        said.append("Groups with fewer dates have fewer cosines or lags; findings.csv names those of each.")
    if nulls:
        said.append(f"Slopes when expected returns are constant: {', '.join(nulls)}.")
    weights = signal.drop_duplicates("leg").dropna(subset="weight")
    if len(weights):
        listed = ", ".join(f"{row['leg']} {row['weight']:+.4g}" for row in weights.to_dict("records"))
        said.append(f"Weights in the identity: {listed}.")
    counts = rows.loc[(rows["term"] == "nothing paid") & (rows["n_tests"] > 1), "n_tests"]
    if len(counts):
        said.append(
            f"This study tests {counts.iloc[0]:,.0f} times whether nothing is paid: findings.csv holds the p-values "
            "adjusted for that (Holm, false discovery; stepped down where there are draws)."
        )
    return tuple(said)


def _joint_notes(joint: pd.DataFrame) -> list[str]:
    """One line a joint hypothesis on the groups: its p, law and what was redundant, or why there is none."""
    said = []
    for row in joint.to_dict("records"):
        result = row["note"] if math.isnan(row["p_value"]) else f"p {p_value(row['p_value'])}, {row['method']}"
        more = f"; {row['note']}" if row["note"] and not math.isnan(row["p_value"]) else ""
        said.append(f"{str(row['term']).capitalize()} in all groups: {result}{more}.")
    return said


def _other_notes(others: pd.DataFrame) -> list[str]:
    """The pooled slope of the return leg by other methods, on one line."""
    said = [
        f"{row['term']} {fixed(row['estimate'])} {in_parentheses(row['std_error'])}"
        for row in others.to_dict("records")
        if not math.isnan(row["estimate"])
    ]
    return [f"Pooled slope of the return leg by other methods: {'; '.join(said)}."] if said else []


def _resolved_note(rows: pd.DataFrame) -> tuple[str, ...]:
    """The resolved premium share of a ratio, and again at other discount coefficients."""
    resolved = rows[(rows["term"] == "resolved premium share") & (rows["group"] == "pooled")]
    if len(resolved) < 2:
        return ()
    said = [
        f"{fixed(row['estimate'])} {in_brackets(row['lower'], row['upper'])}"
        + ("" if row["sample"] == "all" else f" at {row['sample']}")
        for row in resolved.to_dict("records")
    ]
    return (f"Resolved premium share, pooled: {'; '.join(said)}.",)


def latest_table(findings: pd.DataFrame, market: str, parity: str, horizon: str) -> Table | None:
    """Newest signal of each entity with its fitted premium, interval and place in its own history."""
    keep = (findings["section"] == "latest") & (findings["market"] == market)
    rows = findings[keep & (findings["parity"] == parity) & (findings["horizon"] == horizon)]
    if rows.empty:
        return None
    by_entity: dict[str, dict[str, Record]] = {}
    for record in rows.to_dict("records"):
        by_entity.setdefault(str(record["group"]), {})[str(record["term"])] = record
    own_units = parity == "columns"
    here = findings[(findings["market"] == market) & (findings["parity"] == parity)]
    ratio = bool((here["role"] == "carried over").any())
    scales = (1 if own_units or ratio else 100, 1 if own_units else 100)
    lines = [_latest_line(entity, terms, scales) for entity, terms in by_entity.items()]
    signal, premium = (
        f"{name}, %" if scale == 100 else name for name, scale in zip(("signal", "premium"), scales, strict=True)
    )
    return Table(
        title=f"{market}: newest signal and fitted premium, {parity}, {horizon}",
        head=("at", signal, "percentile", premium, "interval"),
        lines=tuple(lines),
        notes=(
            "Premium over the horizon from the pooled fit, in sample; the interval is for the expected premium, not "
            "for the return, which varies far more. Percentile within the entity's own history.",
        ),
        corner="entity",
    )


def _latest_line(entity: str, terms: dict[str, Record], scales: tuple[int, int]) -> Line:
    """`scales` of signal and premium."""
    premium, (wide, scale) = terms["fitted premium"], scales
    cells = (
        word_cell(str(premium["last"])),
        number_cell(terms["signal"]["estimate"], scale=wide),
        percent_cell(terms["percentile"]["estimate"], 0),
        number_cell(premium["estimate"], scale=scale),
        interval_cell(premium["lower"], premium["upper"], scale=scale),
    )
    return Line(entity, cells)


def ledger_table(findings: pd.DataFrame) -> Table | None:
    """Cells read, dropped and used, one line a file."""
    rows = findings[(findings["section"] == "ledger") & (findings["parity"] == "")]
    if rows.empty:
        return None
    reasons = list(dict.fromkeys(rows["term"]))
    files = rows["leg"].str.split(": ", n=1).str[1]
    once = rows.assign(file=files).drop_duplicates(["leg", "group", "term"])
    lines = []
    for file, own in once.groupby("file", sort=False):
        sums = own.groupby("term")["estimate"].sum()
        cells = (
            count_cell(len(own[["leg", "group"]].drop_duplicates())),
            *(count_cell(sums[reason]) for reason in reasons),
        )
        lines.append(Line(str(file), cells))
    return Table("Row ledger: cells read, dropped and why, and used", ("series", *reasons), tuple(lines), corner="file")


def identity_lines(findings: pd.DataFrame) -> list[str]:
    """One line a parity: the largest gap of its identity, and the rules used."""
    rows = findings[findings["section"] == "identity"]
    return [
        f"{row['market']}, {row['parity']}, {row['horizon']}: largest gap {row['estimate']:.1e} over "
        f"{row['n_obs']:,.0f} rows; {row['note']}"
        for row in rows.to_dict("records")
    ]


def check_lines(findings: pd.DataFrame) -> list[str]:
    """Every warning of the load checks, and how many notes there are beside them."""
    rows = findings[findings["section"] == "check"]
    lines = [str(note) for note in rows.loc[rows["rank"].isin(SHOWN_CHECKS), "note"]]
    notes = int((rows["rank"] == "note").sum())
    return [*lines, f"Notes in findings.csv, section check: {notes}."] if notes else lines
