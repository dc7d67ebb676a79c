"""The share of every leg at every horizon, with its interval or bands and its null."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
import pandas as pd

from carrylab.data.calendar import parse_tenor
from carrylab.report.figure import Panel, axes_in, source_of
from carrylab.report.looks import LIGHT, ROLE_COLOURS, ROLE_MARKS, ROLE_NAMES
from carrylab.report.numbers import fixed
from carrylab.report.side_by_side import columns_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure as Canvas

    from carrylab.evidence.pictures import Picture

Floats = npt.NDArray[np.float64]
HEIGHT = 280.0
BAND = "signal, all horizons at once"
FEW = 8  # horizons up to which each has an interval of its own


@dataclass(frozen=True, eq=False, slots=True)
class Profile:
    """Shares of one role (H,) at `years` (H,), pointwise and, where known, uniform bands (2, H), and its null."""

    role: str
    years: Floats
    share: Floats
    pointwise: Floats
    uniform: Floats | None
    null: float


def horizon_panels(findings: pd.DataFrame, _pictures: Sequence[Picture]) -> Iterator[Panel]:
    """One panel for each market that has two horizons or more of its own spread."""
    for number, column in enumerate(columns_of(findings), 1):
        rows = rows_of(findings, column.market, column.parity)
        names = sorted(rows["horizon"].unique(), key=lambda name: parse_tenor(name).years)
        if len(names) < 2:
            continue
        profiles = [found for role in ROLE_NAMES if (found := profile_of(rows, role)) is not None]
        if profiles:
            spans = f"{rows['first'].min()} to {rows['last'].max()}"
            yield Panel(
                name=f"horizons-{number}",
                title=column.market,
                finding=_said(profiles, names),
                source=f"{source_of(findings, column.market)}Sample: origins {spans} by {rows['interval'].iloc[0]}; "
                "a longer horizon has fewer windows that do not overlap.",
                height=HEIGHT,
                draw=lambda canvas, found=(profiles, names): _draw(canvas, *found),  # type: ignore[misc]
            )


def rows_of(findings: pd.DataFrame, market: str, parity: str) -> pd.DataFrame:
    """Pooled slopes on the signal by horizon: the profile where it was asked for, else the horizons of the study."""
    own = findings[(findings["market"] == market) & (findings["parity"] == parity) & (findings["group"] == "pooled")]
    own = own[own["term"].isin(["signal", "all paid", BAND]) & (own["sample"] == "all")]
    asked = own[own["section"] == "horizons"]
    if len(asked["horizon"].unique()) > 1:
        return asked
    return own[(own["section"] == "shares") & (own["rank"] == "headline")]


def profile_of(rows: pd.DataFrame, role: str) -> Profile | None:
    """Shares of one role at each horizon; several fundamental legs are taken together, with no null of their own."""
    own = rows[(rows["role"] == role) & (rows["term"] == "signal") & rows["weight"].notna()]
    if len(own["leg"].unique()) > 1:
        own = rows[rows["term"] == "all paid"].assign(weight=1.0, null=math.nan) if role == "fundamental" else own[:0]
    if own.empty:
        return None
    weight = float(own["weight"].iloc[0])
    own = _by_years(own)
    band = _by_years(rows[(rows["role"] == role) & (rows["term"] == BAND)])
    return Profile(
        role=role,
        years=own["years"].to_numpy(),
        share=weight * own["estimate"].to_numpy(),
        pointwise=_ends(own, weight),
        uniform=_ends(band, weight) if len(band) == len(own) else None,
        null=weight * float(own["null"].iloc[0]),
    )


def _by_years(rows: pd.DataFrame) -> pd.DataFrame:
    return rows.assign(years=[parse_tenor(name).years for name in rows["horizon"]]).sort_values("years")


def _ends(rows: pd.DataFrame, weight: float) -> Floats:
    """Lower and upper end (2, H) of the share: a weight below zero turns an interval round."""
    ends: Floats = np.sort(weight * rows[["lower", "upper"]].to_numpy().T, axis=0)
    return ends


def _said(profiles: list[Profile], names: list[str]) -> str:
    ends = [
        f"{ROLE_NAMES[one.role]} {fixed(float(one.share[0]))} at {names[0]} and {fixed(float(one.share[-1]))} at "
        f"{names[-1]}"
        for one in profiles
    ]
    return f"Share of the spread by horizon: {'; '.join(ends)}."


def _draw(canvas: Canvas, profiles: list[Profile], names: list[str]) -> None:
    ax = axes_in(canvas, (52, 44, 8, 30))
    years = np.array([parse_tenor(name).years for name in names])
    for number, one in enumerate(profiles):
        _profile_line(ax, one, 1 + 0.03 * (number - (len(profiles) - 1) / 2))
    ax.set_xscale("log")
    ax.set_xlim(years[0] / 1.25, years[-1] * 1.25)
    ax.set_xticks(_spread(years), labels=[names[int(at)] for at in np.searchsorted(years, _spread(years))])
    ax.set_xticks([], minor=True)
    ax.set_xlabel("horizon")
    ax.set_title("share of the spread", pad=20)
    ax.legend(loc="lower left", bbox_to_anchor=(0, 1), ncols=3, borderaxespad=0.1)


def _spread(years: Floats) -> Floats:
    """Horizons far enough from each other for their names, the last one always."""
    kept = [float(years[-1])]
    for one in years[-2::-1]:
        if kept[-1] / one > 1.3:
            kept.append(float(one))
    return np.array(kept[::-1])


def _profile_line(ax: Axes, one: Profile, shift: float) -> None:
    colour = LIGHT[ROLE_COLOURS[one.role]]
    x = one.years * shift
    if not math.isnan(one.null):
        ax.axhline(one.null, color=colour, linewidth=1.2, linestyle=(0, (4, 2)))
    if one.uniform is not None:
        ax.fill_between(one.years, *one.uniform, color=colour, alpha=0.14, linewidth=0)
    if len(one.years) > FEW:
        ax.fill_between(one.years, *one.pointwise, color=colour, alpha=0.22, linewidth=0)
    else:
        ax.vlines(x, *one.pointwise, color=colour, linewidth=1.8)
    small = 6 if len(one.years) <= FEW else 0
    ax.plot(
        x,
        one.share,
        color=colour,
        linewidth=1.6,
        marker=ROLE_MARKS[one.role],
        markersize=small,
        label=ROLE_NAMES[one.role],
    )
