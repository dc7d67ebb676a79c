"""The spread through time and what followed it, with the states of the study shaded."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
import pandas as pd

from carrylab.report.figure import Panel, axes_in, sample_of, source_of
from carrylab.report.looks import LIGHT, ROLE_COLOURS, ROLE_NAMES
from carrylab.report.numbers import fixed
from carrylab.report.side_by_side import Column, columns_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure as Canvas

    from carrylab.evidence.pictures import Picture

Floats = npt.NDArray[np.float64]
FOLLOWED = ("return", "fundamental")
HEIGHT = 330.0


@dataclass(frozen=True, eq=False, slots=True)
class Unit:
    """How numbers of one picture are written: their scale and its sign."""

    scale: float
    words: str


def unit_of(picture: Picture) -> Unit:
    """Percent for spreads and returns; a log ratio and columns of the user's own as they are."""
    if picture.parity == "columns":
        return Unit(1, "unit of the file")
    return Unit(1, "log") if "carried over" in picture.roles else Unit(100, "%")


def part_of(picture: Picture, role: str, values: Floats) -> Floats | None:
    """Weighted legs of one role (., L) taken together (.,); a leg without weight as it is; None without such a leg."""
    at = [number for number, own in enumerate(picture.roles) if own == role]
    if not at:
        return None
    if np.isnan(picture.weights[at]).any():
        return np.asarray(values[..., at[0]])
    return np.asarray(values[..., at] @ picture.weights[at])


def shown_pictures(findings: pd.DataFrame, pictures: Sequence[Picture]) -> Iterator[tuple[Column, Picture]]:
    """The picture behind each column of the first table."""
    at = {(one.market, one.parity, one.horizon): one for one in pictures}
    for column in columns_of(findings):
        if (column.market, column.parity, column.horizon) in at:
            yield column, at[column.market, column.parity, column.horizon]


def path_panels(findings: pd.DataFrame, pictures: Sequence[Picture]) -> Iterator[Panel]:
    """One panel a market."""
    for number, (column, picture) in enumerate(shown_pictures(findings, pictures), 1):
        row = column.find("signal").iloc[0]
        states = ", ".join(state.name for state in picture.states)
        shaded = f" Shaded: {states}." if states else ""
        yield Panel(
            name=f"path-{number}",
            title=picture.market,
            finding=_said(picture),
            source=f"Means over entities.{shaded} {source_of(findings, picture.market)}{sample_of(row)}",
            height=HEIGHT,
            draw=lambda canvas, picture=picture: _draw(canvas, picture),  # type: ignore[misc]
        )


def _said(picture: Picture) -> str:
    """Where the spread stood lowest, highest and last."""
    unit, signal = unit_of(picture), picture.path.signal
    known = np.flatnonzero(np.isfinite(signal))
    low, high = known[int(np.argmin(signal[known]))], known[int(np.argmax(signal[known]))]

    def at(row: int) -> str:
        percent = "%" if unit.words == "%" else ""
        return f"{fixed(unit.scale * float(signal[row]))}{percent} in {str(picture.path.days[row])[:7]}"

    return f"The {picture.signal} was lowest, {at(int(low))}, highest, {at(int(high))}, and last {at(int(known[-1]))}."


def _draw(canvas: Canvas, picture: Picture) -> None:
    unit, days = unit_of(picture), picture.path.days
    top = axes_in(canvas, (52, 190, 8, 18))
    bottom = axes_in(canvas, (52, 34, 8, 176))
    for ax in (top, bottom):
        _shade(ax, picture)
        ax.axhline(0, color=LIGHT["line"], linewidth=1, zorder=1)
        ax.set_xlim(days[0], days[-1])
    top.plot(days, unit.scale * picture.path.signal, color=LIGHT["ink"], linewidth=1.5)
    for role in FOLLOWED:
        part = part_of(picture, role, picture.path.legs)
        if part is not None:
            style = "-" if role == "return" else (0, (4, 1.5))
            colour = LIGHT[ROLE_COLOURS[role]]
            bottom.plot(days, unit.scale * part, color=colour, linewidth=1.4, linestyle=style, label=ROLE_NAMES[role])
    top.tick_params(labelbottom=False)
    _tight(top, unit.scale * picture.path.signal)
    top.set_title(f"{picture.signal}, {unit.words}")
    bottom.set_title(f"what followed over {picture.horizon}, {unit.words}", pad=20)
    bottom.legend(loc="lower left", bbox_to_anchor=(0, 1), ncols=2, borderaxespad=0.1)
    bottom.set_xlabel("origin date")


def _tight(ax: Axes, values: Floats) -> None:
    """A level far from zero is drawn in its own range."""
    known = values[np.isfinite(values)]
    low, high = float(known.min()), float(known.max())
    if low > 0 or high < 0:
        room = 0.06 * (high - low)
        if min(abs(low), abs(high)) > high - low:
            ax.set_ylim(low - room, high + room)


def _shade(ax: Axes, picture: Picture) -> None:
    """Grey where any state of the study holds."""
    for state in picture.states:
        inside = (state.labels != "") & (state.labels != f"not {state.name}")
        for held, rows in itertools.groupby(range(len(inside)), key=lambda row: bool(inside[row])):
            if held:
                found = list(rows)
                end = min(found[-1] + 1, len(inside) - 1)
                ax.axvspan(picture.path.days[found[0]], picture.path.days[end], color=LIGHT["state"], lw=0, zorder=0)
