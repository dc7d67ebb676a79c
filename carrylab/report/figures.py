"""What every whole report draws, in order: the one list of figures, each only where its findings or paths exist."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import pandas as pd

from carrylab.report.figure import Drawing, Figure
from carrylab.report.figures_forecast import forecast_panels
from carrylab.report.figures_horizons import horizon_panels
from carrylab.report.figures_paths import path_panels
from carrylab.report.figures_points import point_panels
from carrylab.report.figures_shares import shares_panels

if TYPE_CHECKING:
    from carrylab.evidence.pictures import Picture

DRAWINGS: tuple[Drawing, ...] = (
    Drawing(
        "shares",
        "Who gets the spread?",
        "Each market's shares with their intervals. Filled marks are seen by the tests, hollow ones are not.",
        shares_panels,
    ),
    Drawing(
        "horizons",
        "How do the shares change with the horizon?",
        "The share of each leg at each horizon with its own interval and, shaded, the band that holds at all horizons "
        "at once where the study asks for it; dashed, where it would lie if expected returns were constant.",
        horizon_panels,
    ),
    Drawing(
        "path",
        "What was the spread, and what followed?",
        "Above, the spread at each date; below, what followed over the horizon from that date, weighted so that the "
        "parts add up to the spread.",
        path_panels,
    ),
    Drawing(
        "points",
        "How closely did it follow?",
        "Each dot is one entity at one date. The line through the dots is the slope of the table; the dashed one is "
        "where it would lie if expected returns were constant.",
        point_panels,
    ),
    Drawing(
        "forecast",
        "Would it have worked?",
        "Squared errors of the mean of the past less those of the spread's forecast, summed up to each date. The line "
        "rises where the spread forecast better, and ends above zero if it did so on the whole.",
        forecast_panels,
    ),
)


def figures_of(findings: pd.DataFrame, pictures: Sequence[Picture]) -> list[Figure]:
    """Every figure that has something to show."""
    made = [Figure(one.name, one.title, one.reads, tuple(one.draw(findings, pictures))) for one in DRAWINGS]
    return [figure for figure in made if figure.panels]
