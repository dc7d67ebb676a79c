"""The further questions of a study: every function that answers one, and the rows they all give."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from carrylab.evidence.case import Case
from carrylab.evidence.curve import curve_rows
from carrylab.evidence.forecast import forecast_rows
from carrylab.evidence.horizons import horizon_rows
from carrylab.evidence.markets import across_market_rows
from carrylab.evidence.parts import part_rows
from carrylab.evidence.setting import Row
from carrylab.evidence.states import state_rows
from carrylab.evidence.surveys import survey_rows
from carrylab.evidence.windows import window_rows
from carrylab.options import Questions

# Each returns no rows where its question is not asked.
OF_ONE_PARITY: tuple[Callable[[Case, Questions], list[Row]], ...] = (
    part_rows,
    state_rows,
    survey_rows,
    curve_rows,
    forecast_rows,
    window_rows,
)
OF_ALL_MARKETS: tuple[Callable[[Sequence[Case], Questions], list[Row]], ...] = (horizon_rows, across_market_rows)


def case_rows(case: Case, asked: Questions) -> list[Row]:
    """Rows of every question that one parity answers on its own."""
    return [row for answer in OF_ONE_PARITY for row in answer(case, asked)]


def study_rows(cases: Sequence[Case], asked: Questions) -> list[Row]:
    """Rows of every question that takes all markets together."""
    return [row for answer in OF_ALL_MARKETS for row in answer(cases, asked)]
