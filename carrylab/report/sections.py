"""What every whole report holds, in order: the one list that the text, the page and the papers are made from."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

import pandas as pd

from carrylab.report.across import across_tables
from carrylab.report.answer import answer_lines
from carrylab.report.curve import curve_tables
from carrylab.report.detail import check_lines, detail_tables, identity_lines, latest_table, ledger_table
from carrylab.report.forecast import forecast_tables
from carrylab.report.horizons import horizon_tables
from carrylab.report.joint import joint_tables
from carrylab.report.side_by_side import columns_of, comparison_table, side_by_side
from carrylab.report.slope_parts import part_tables
from carrylab.report.states import state_tables
from carrylab.report.surveys import survey_tables
from carrylab.report.table import Table
from carrylab.report.windows import window_tables

# A table, or a sentence or two.
Piece = Table | str
# Sections that the page sets in a place or a manner of its own.
ANSWER, DETAIL, CAUTIONS_HEAD = "The answer", "Market by market", "Cautions"
CAUTIONS = (
    "Not investment advice. Everything here is in sample, and a premium in sample is no forecast.",
    "Before costs, margin, tax and capital controls. Carry earns little by little and loses in crashes; a peg that "
    "held says nothing about the day it breaks.",
    "Horizons, markets and countries are not independent evidence. Local rules may ask for licensed advice.",
)


@dataclass(frozen=True, slots=True)
class Section:
    """A part of the report: `write` turns findings into its tables and sentences, or into none where it has none."""

    title: str
    write: Callable[[pd.DataFrame], Iterable[Piece]]


@dataclass(frozen=True, eq=False, slots=True)
class Part:
    """A section as written for one study."""

    title: str
    pieces: tuple[Piece, ...]


def _own_spreads(findings: pd.DataFrame) -> Iterator[Table]:
    yield from _there(side_by_side(findings, title="Is the spread paid out, or does it come true?"))
    yield from _there(comparison_table(findings))


def _carry(findings: pd.DataFrame) -> Iterator[Table]:
    """Carry again beside the markets' own spreads, where these are others."""
    if len(columns_of(findings, "carry")) < 2 or {column.parity for column in columns_of(findings)} == {"carry"}:
        return
    yield from _there(side_by_side(findings, title="Carry, the same signal in every market", parity="carry"))
    yield from _there(comparison_table(findings, "carry"))


def _latest(findings: pd.DataFrame) -> Iterator[Table]:
    for column in columns_of(findings):
        yield from _there(latest_table(findings, column.market, column.parity, column.horizon))


def _ledger(findings: pd.DataFrame) -> Iterator[Table]:
    yield from _there(ledger_table(findings))


def _there(table: Table | None) -> Iterator[Table]:
    if table is not None:
        yield table


# Answers to the further questions of a study, each in a module of its own beside this one.
EVIDENCE: tuple[Section, ...] = (
    Section("Horizons", horizon_tables),
    Section("Periods", window_tables),
    Section("Parts of the slope", part_tables),
    Section("States", state_tables),
    Section("The rest of the curve", curve_tables),
    Section("Surveys", survey_tables),
    Section("Across markets", across_tables),
    Section("Out of sample", forecast_tables),
)
SECTIONS: tuple[Section, ...] = (
    Section(ANSWER, answer_lines),
    Section("Side by side", _own_spreads),
    Section("Carry, the same signal in every market", _carry),
    Section(DETAIL, detail_tables),
    Section("Joint tests", joint_tables),
    Section("Newest signals", _latest),
    *EVIDENCE,
    Section("Load checks", check_lines),
    Section("Identities", identity_lines),
    Section("Row ledger", _ledger),
)


def parts_of(findings: pd.DataFrame, audit: Iterable[str] = ()) -> list[Part]:
    """Every section that has something to say, the lines of an audit and the cautions last."""
    parts = [Part(section.title, tuple(section.write(findings))) for section in SECTIONS]
    parts += [Part("Audit", tuple(audit)), Part(CAUTIONS_HEAD, CAUTIONS)]
    return [part for part in parts if part.pieces]
