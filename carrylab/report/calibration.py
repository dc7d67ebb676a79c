"""What the tests of a study are worth: one line a regression, then every kind of error of each."""

from __future__ import annotations

import math
from collections.abc import Hashable, Iterable, Iterator
from typing import Any

import pandas as pd

from carrylab.report.numbers import fixed
from carrylab.report.sections import Part
from carrylab.report.table import Cell, Line, Table, number_cell, percent_cell, word_cell
from carrylab.report.text import parts_text

Record = dict[Hashable, Any]
HEAVY = 0.075  # a nominal 5% test that rejects this often or more is named in words
WIDE = 1.96  # Monte Carlo errors
IGNORES = "ignores"
HEAD = ("true size, %", "half, %", "full, %", "smallest share", "covers, %")
MEANING = (
    "True size: how often a true null, that nothing is paid, is rejected at a nominal 5%. Half, full: how often a "
    "premium of one half, and of one, is told from zero (power). Smallest share: the premium share told from zero in "
    "80% of samples; too large a size is taken out first, for what it adds to power is no power. Covers: how often the "
    "interval holds the share, at half premium.",
)


def calibration_text(findings: pd.DataFrame, *, title: str, width: int) -> str:
    """The whole report of a calibration as plain text."""
    parts = [
        Part("What the tests are worth", tuple(_summary(findings))),
        Part("Regression by regression", tuple(_tables(findings))),
    ]
    return parts_text([part for part in parts if part.pieces], title, width)


def _groups(findings: pd.DataFrame) -> Iterator[tuple[tuple[str, str, str], list[Record]]]:
    for key, rows in findings.groupby(["market", "parity", "horizon"], sort=False):
        market, parity, horizon = (str(part) for part in key)
        yield (market, parity, horizon), rows.to_dict("records")


def _kinds(records: Iterable[Record]) -> dict[str, dict[str, Record]]:
    """Rows by kind of error and then by what they say: "size: bartlett" is the size of bartlett."""
    found: dict[str, dict[str, Record]] = {}
    for record in records:
        what, colon, kind = str(record["term"]).partition(": ")
        if colon:
            found.setdefault(kind, {})[what] = record
    return found


def _value(rows: dict[str, Record], what: str) -> float:
    return float(rows[what]["estimate"]) if what in rows else math.nan


def _summary(findings: pd.DataFrame) -> Iterator[Table | str]:
    """One line a regression: the study's own two tests; then what was not simulated."""
    by_market: dict[str, list[Line]] = {}
    for (market, parity, horizon), records in _groups(findings):
        if _kinds(records) and not _says(records, "same regression"):
            by_market.setdefault(market, []).append(Line(f"{parity}, {horizon}", _own_tests(_kinds(records))))
    lines = [line for market, own in by_market.items() for line in (Line(market, heading=True), *own)]
    if lines:
        head = ("headline", *HEAD[:1], *HEAD[2:4], "second opinion", HEAD[0])
        yield Table("The study's own tests that nothing is paid, nominal 5%", head, tuple(lines), MEANING)
    for place, records in _groups(findings):
        for term, words in (("not simulated", "not simulated: "), ("same regression", "the same regression ")):
            if _says(records, term):
                yield f"{', '.join(place)}: {words}{_says(records, term)}."


def _own_tests(kinds: dict[str, dict[str, Record]]) -> tuple[Cell, ...]:
    """Cells of headline and second opinion."""
    ranked = {str(rows["size"]["rank"]): (kind, rows) for kind, rows in kinds.items()}
    none: tuple[str, dict[str, Record]] = ("-", {})
    (headline, rows), (second, others) = (ranked.get(rank, none) for rank in ("headline", "second opinion"))
    size, _, full, smallest, _ = _cells(rows)
    return (word_cell(headline), size, full, smallest, word_cell(second), _cells(others)[0])


def _tables(findings: pd.DataFrame) -> Iterator[Table]:
    for (market, parity, horizon), records in _groups(findings):
        kinds = _kinds(records)
        there = {kind: rows for kind, rows in kinds.items() if not math.isnan(_value(rows, "size"))}
        if there and not _says(records, "same regression"):
            yield Table(
                f"{market}: {parity}, {horizon}",
                HEAD,
                tuple(Line(_label(kind, rows["size"]), _cells(rows)) for kind, rows in there.items()),
                tuple(_notes(records, kinds)),
                corner="errors",
            )


def _says(records: list[Record], term: str) -> str:
    """The note of one term, empty where it is not there."""
    return next((str(record["note"]) for record in records if record["term"] == term), "")


def _cells(rows: dict[str, Record]) -> tuple[Cell, ...]:
    """Size, both powers, smallest share and coverage."""
    return (
        percent_cell(_value(rows, "size"), 1),
        percent_cell(_value(rows, "power, half premium"), 0),
        percent_cell(_value(rows, "power, full premium"), 0),
        number_cell(_value(rows, "smallest share")),
        percent_cell(_value(rows, "coverage, half premium"), 1),
    )


def _label(kind: str, size: Record) -> str:
    marks = [str(size["rank"])] if size["rank"] else []
    marks += ["ignores overlap"] if str(size["note"]).startswith(IGNORES) else []
    return named(kind, size) + (f" ({', '.join(marks)})" if marks else "")


def named(kind: str, size: Record) -> str:
    """A kind of error with its lag."""
    lags = float(size["lags"])
    return kind if math.isnan(lags) or not lags else f"{kind}, lag {lags:.0f}"


def _notes(records: list[Record], kinds: dict[str, dict[str, Record]]) -> Iterator[str]:
    """Too large a size in words, what the numbers rest on, and what cannot be had."""
    yield from _heavy(kinds)
    one = {str(record["term"]): record for record in records}
    samples = one["samples"]
    runs = float(samples["estimate"])
    error = WIDE * math.sqrt(0.05 * 0.95 / runs)
    yield (
        f"{runs:,.0f} samples in which nothing is paid: {samples['method']}. Sizes from {100 * (0.05 - error):.1f}% to "
        f"{100 * (0.05 + error):.1f}% are within the Monte Carlo error of 5%."
    )
    if "carried over" in one:
        share = 1.0 - float(one["carried over"]["estimate"])
        yield (
            f"Of the signal {fixed(1.0 - share)} is carried over to the horizon in these samples; half and full "
            f"premium are of the rest, premium shares of {fixed(share / 2.0, 3)} and {fixed(share, 3)}."
        )
    for term, record in one.items():
        if term.startswith("warning"):
            yield f"{_capital(str(record['note']))}."
    yield from _not_on_offer(kinds)


def _heavy(kinds: dict[str, dict[str, Record]]) -> Iterator[str]:
    """A nominal 5% that is really more, in words, the worst first; kinds that ignore the overlap apart."""
    heavy = sorted(
        ((_value(rows, "size"), kind, rows["size"]) for kind, rows in kinds.items() if _value(rows, "size") >= HEAVY),
        key=lambda one: -one[0],
    )
    honest = [(rate, named(kind, size)) for rate, kind, size in heavy if not str(size["note"]).startswith(IGNORES)]
    if honest:
        (rate, name), *others = honest
        more = "".join(f"; by {other} {share:.0%}" for share, other in others)
        yield f"A nominal 5% test by {name} really rejects {rate:.0%} of true nulls here{more}."
    ignoring = [(rate, kind, str(size["note"])) for rate, kind, size in heavy if str(size["note"]).startswith(IGNORES)]
    if ignoring:
        listed = ", ".join(f"{kind} {rate:.0%}" for rate, kind, _ in ignoring)
        yield f"What {ignoring[0][2]} rejects: {listed}."


def _not_on_offer(kinds: dict[str, dict[str, Record]]) -> Iterator[str]:
    reasons: dict[str, list[str]] = {}
    for kind, rows in kinds.items():
        if math.isnan(_value(rows, "size")):
            reasons.setdefault(str(rows["size"]["note"]), []).append(kind)
    for why, names in reasons.items():
        yield f"Not counted, {', '.join(names)}: {why}."


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]
