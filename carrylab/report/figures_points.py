"""The spread against what followed: rows of the regression, the fitted line, the line where returns are constant."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from carrylab.report.figure import Panel, axes_in, sample_of, source_of
from carrylab.report.figures_paths import FOLLOWED, Floats, Unit, part_of, shown_pictures, unit_of
from carrylab.report.looks import LIGHT, ROLE_COLOURS
from carrylab.report.numbers import fixed
from carrylab.report.side_by_side import ROLE_WORDS, Column

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure as Canvas

    from carrylab.evidence.pictures import Picture

HEIGHT = 290.0
SEVERAL = "all fundamentals"


@dataclass(frozen=True, eq=False, slots=True)
class Scatter:
    """Points of one panel, slope of the fitted line through their centre, slope of the null (NaN: none), and words."""

    x: Floats
    y: Floats
    centre: tuple[float, float]
    slope: float
    null: float
    role: str
    unit: Unit
    labels: tuple[str, str]


def point_panels(findings: pd.DataFrame, pictures: Sequence[Picture]) -> Iterator[Panel]:
    """Two panels a market: against the excess return and against the fundamental."""
    for number, (column, picture) in enumerate(shown_pictures(findings, pictures), 1):
        for role in FOLLOWED:
            found = _scatter(column, picture, role)
            if found is not None:
                row = column.find("signal", role=role).iloc[0]
                yield _panel(found, (f"points-{number}-{role}", picture), _said(found, picture, row), row, findings)


def _panel(found: Scatter, place: tuple[str, Picture], said: str, row: pd.Series, findings: pd.DataFrame) -> Panel:
    name, picture = place
    apart = (
        ""
        if picture.points.apart == 1
        else f"Every {_nth(picture.points.apart)} date, so that outcomes do not overlap. "
    )
    effects = {"none": "", "entity": "Entity effects out. ", "time": "Time effects out. "}
    return Panel(
        name=name,
        title=f"{picture.market}: {ROLE_WORDS[found.role]}",
        finding=said,
        source=f"{apart}{effects.get(picture.effects, 'Entity and time effects out. ')}"
        f"{source_of(findings, picture.market)}{sample_of(row)}",
        height=HEIGHT,
        draw=lambda canvas: _draw(canvas, found),
    )


def _nth(count: int) -> str:
    ending = "th" if count % 100 in (11, 12, 13) else {1: "st", 2: "nd", 3: "rd"}.get(count % 10, "th")
    return f"{count}{ending}"


def _scatter(column: Column, picture: Picture, role: str) -> Scatter | None:
    y = part_of(picture, role, picture.points.legs)
    rows = column.find("signal", role=role)
    if y is None or not len(rows):
        return None
    centre = part_of(picture, role, picture.points.centre[1:])
    weights = rows["weight"].to_numpy()
    weighted = not np.isnan(weights).any()
    slope = float((weights * rows["estimate"]).sum()) if weighted else float(rows["estimate"].iloc[0])
    null = math.nan if len(rows) > 1 else float(rows["null"].iloc[0] * (weights[0] if weighted else 1.0))
    unit = unit_of(picture)
    return Scatter(
        x=unit.scale * picture.points.signal,
        y=unit.scale * y,
        centre=(unit.scale * float(picture.points.centre[0]), unit.scale * float(np.asarray(centre))),
        slope=slope,
        null=null,
        role=role,
        unit=unit,
        labels=(f"{picture.signal}, {unit.words}", _outcome(picture, rows, unit)),
    )


def _outcome(picture: Picture, rows: pd.DataFrame, unit: Unit) -> str:
    """The leg's name as the axis has it: turned round where its weight is -1, summed where there are several."""
    if len(rows) > 1:
        return f"{SEVERAL} over {picture.horizon}, {unit.words}"
    weight, name = rows["weight"].iloc[0], rows["leg"].iloc[0]
    turned = {1.0: "", -1.0: "minus "}.get(weight, "" if math.isnan(weight) else f"{weight:.3g} x ")
    return f"{turned}{name} over {picture.horizon}, {unit.words}"


def _said(found: Scatter, picture: Picture, row: pd.Series) -> str:
    outcome = found.labels[1].partition(" over ")[0]
    against = "" if math.isnan(found.null) else f", against {fixed(found.null)} if expected returns were constant"
    r2 = "" if outcome == SEVERAL else f" R2 {fixed(row['r2'], 3)}."
    return f"A {picture.signal} one point wider was followed by {fixed(found.slope)} points of {outcome}{against}.{r2}"


def _draw(canvas: Canvas, found: Scatter) -> None:
    ax = axes_in(canvas, (52, 44, 8, 30))
    colour = LIGHT[ROLE_COLOURS[found.role]]
    _dots(ax, found.x, found.y, colour)
    low, high = float(found.x.min()), float(found.x.max())
    ends = np.array([low, high])
    for slope, style, label in ((found.null, (0, (4, 2)), "constant expected returns"), (found.slope, "-", "fitted")):
        if not math.isnan(slope):
            line = found.centre[1] + slope * (ends - found.centre[0])
            ax.plot(ends, line, color=LIGHT["ink"], linestyle=style, linewidth=2 if style == "-" else 1.4, label=label)
    ax.set_xlabel(found.labels[0])
    ax.set_title(found.labels[1], pad=20)
    ax.legend(loc="lower left", bbox_to_anchor=(0, 1), ncols=2, borderaxespad=0.1)


def _dots(ax: Axes, x: Floats, y: Floats, colour: str) -> None:
    """Dots as one line of round strokes a thousandth of the axis long: a third of the size of as many markers."""
    step = 1e-3 * float(np.ptp(x))
    across = np.stack([x, x + step, np.full_like(x, np.nan)], axis=1).ravel()
    (line,) = ax.plot(across, np.repeat(y, 3), color=colour, alpha=0.4, linewidth=3.4, solid_capstyle="round")
    line.get_path().should_simplify = False
