"""One figure model for every form: what is drawn, what it says, and where it comes from."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure as Canvas

    from carrylab.evidence.pictures import Picture

WIDTH = 380.0  # points, for every panel: a phone's width, and two or three beside each other on a larger screen


@dataclass(frozen=True, eq=False, slots=True)
class Panel:
    """One picture. `finding` says in words what it shows, `source` names data and sample, `height` is in points.

    `draw` puts the picture on an empty canvas of matplotlib.
    """

    name: str
    title: str
    finding: str
    source: str
    height: float
    draw: Callable[[Canvas], None]


@dataclass(frozen=True, eq=False, slots=True)
class Figure:
    """Panels that are read together: a question as title, and how to read them."""

    name: str
    title: str
    reads: str
    panels: tuple[Panel, ...]


@dataclass(frozen=True, slots=True)
class Drawing:
    """A kind of figure: `draw` makes its panels from findings and pictures, none where these have nothing for it."""

    name: str
    title: str
    reads: str
    draw: Callable[[pd.DataFrame, Sequence[Picture]], Iterator[Panel]]


def axes_in(canvas: Canvas, box: tuple[float, float, float, float]) -> Axes:
    """Axes whose left, bottom, right and top edges are so many points from those of the canvas."""
    width, height = (72 * side for side in canvas.get_size_inches())
    left, bottom, right, top = box
    place = (left / width, bottom / height, (width - left - right) / width, (height - bottom - top) / height)
    return canvas.add_axes(place)


def day_of(label: str) -> np.datetime64:
    """First day of a period by its name in the findings.

    >>> [str(day_of(label)) for label in ("2024", "2024-Q2", "2024-03", "2024-W01", "2024-01-31")]
    ['2024-01-01', '2024-04-01', '2024-03-01', '2024-01-01', '2024-01-31']
    """
    year, _, rest = label.partition("-")
    if rest.startswith("Q"):
        return np.datetime64(f"{year}-{3 * int(rest[1:]) - 2:02d}", "D")
    if rest.startswith("W"):
        return np.datetime64(datetime.date.fromisocalendar(int(year), int(rest[1:]), 1), "D")
    return np.datetime64(label, "D")


def source_of(findings: pd.DataFrame, market: str) -> str:
    """The data files of one market."""
    rows = findings[(findings["section"] == "ledger") & (findings["parity"] == "") & (findings["market"] == market)]
    files = rows["leg"].str.split(": ", n=1).str[-1].unique()
    return f"Data: {', '.join(files)}. " if len(files) else ""


def sample_of(row: pd.Series) -> str:
    """Sample of one finding in words."""
    entities = f"{row['n_entities']:,.0f} {'entity' if row['n_entities'] == 1 else 'entities'}"
    return (
        f"Sample: origins {row['first']} to {row['last']} by {row['interval']}, {entities}, {row['n_obs']:,.0f} rows."
    )
