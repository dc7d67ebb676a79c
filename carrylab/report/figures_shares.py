"""Shares of every market with their intervals and nulls, one below the other."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import pandas as pd

from carrylab.report.figure import Panel, axes_in, sample_of, source_of
from carrylab.report.looks import LIGHT, ROLE_COLOURS, ROLE_MARKS, ROLE_NAMES
from carrylab.report.numbers import fixed, in_brackets
from carrylab.report.side_by_side import Column, columns_of, verdict_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure as Canvas

    from carrylab.evidence.pictures import Picture

NULL = "where expected returns are constant"
ROW, LABELS, VALUES = 21.0, 112.0, 110.0  # points: a row's height, room for names and for numbers
BELOW = 56.0


@dataclass(frozen=True, eq=False, slots=True)
class Share:
    """One share with its interval, the share it has when expected returns are constant, and whether a test sees it."""

    role: str
    value: float
    lower: float
    upper: float
    null: float
    seen: bool


def shares_panels(findings: pd.DataFrame, _pictures: Sequence[Picture]) -> Iterator[Panel]:
    """One panel for all markets whose legs have weights."""
    found = {column.market: (column, shares_of(column)) for column in columns_of(findings)}
    kept = {market: shares for market, (_, shares) in found.items() if shares}
    if not kept:
        return
    count = sum(len(shares) + 1 for shares in kept.values())
    sources = [
        f"{market}: {source_of(findings, market)}{sample_of(found[market][0].find('signal').iloc[0])}"
        for market in kept
    ]
    yield Panel(
        name="shares",
        title="",
        finding=" ".join(f"{market}: {_said(shares)}." for market, shares in kept.items()),
        source=" ".join(sources),
        height=ROW * count + 68,
        draw=lambda canvas: _draw(canvas, kept),
    )


def shares_of(column: Column) -> list[Share]:
    """The shares of one market; several fundamental legs are taken together."""
    return [share for role in ROLE_NAMES for share in _share(column, role)]


def _share(column: Column, role: str) -> Iterator[Share]:
    rows = column.find("signal", role=role)
    whole = len(rows) > 1 and role == "fundamental"
    rows = column.find("all paid") if whole else rows
    if len(rows) != 1 or (math.isnan(rows["weight"].iloc[0]) and not whole):
        return
    row, weight = rows.iloc[0], 1.0 if whole else float(rows["weight"].iloc[0])
    lower, upper = sorted((weight * row["lower"], weight * row["upper"]))
    null = math.nan if whole else weight * row["null"]
    yield Share(role, weight * float(row["estimate"]), lower, upper, null, _seen(column, role))


def _seen(column: Column, role: str) -> bool:
    if role == "return":
        words = verdict_of(column).text
        return words == "firm" or (not words and column.number("nothing paid", "p_value") < 0.05)
    return role != "fundamental" or column.number("all paid", "p_value") < 0.05


def _said(shares: list[Share]) -> str:
    return ", ".join(
        f"{ROLE_NAMES[one.role]} {fixed(one.value)} {in_brackets(one.lower, one.upper)}"
        + ("" if one.seen else " (not seen)")
        for one in shares
    )


def _draw(canvas: Canvas, markets: dict[str, list[Share]]) -> None:
    ax = axes_in(canvas, (LABELS, BELOW, VALUES, 4))
    count = sum(len(shares) + 1 for shares in markets.values())
    ax.set_ylim(count - 0.2, -0.6)
    for at in (0.0, 1.0):
        ax.axvline(at, color=LIGHT["line"], linewidth=1, zorder=0)
    row = 0
    for market, shares in markets.items():
        _words(ax, market, (row, "left", "ink"), weight="bold")
        for number, share in enumerate(shares, row + 1):
            _row(ax, number, share)
        row += len(shares) + 1
    ax.set_yticks([])
    ax.set_xlabel("share of the spread")
    ax.spines["left"].set_visible(False)
    _key(ax)


def _row(ax: Axes, row: int, share: Share) -> None:
    colour = LIGHT[ROLE_COLOURS[share.role]]
    if not math.isnan(share.lower):
        ax.plot([share.lower, share.upper], [row, row], color=colour, linewidth=2, solid_capstyle="round")
    if not math.isnan(share.null):
        ax.plot([share.null] * 2, [row - 0.42, row + 0.42], color=LIGHT["ink"], linewidth=1.6)
    ax.plot(
        share.value,
        row,
        ROLE_MARKS[share.role],
        color=colour,
        markersize=7,
        markeredgewidth=1.6,
        markerfacecolor=colour if share.seen else LIGHT["paper"],
    )
    _words(ax, ROLE_NAMES[share.role], (row, "left", "soft"))
    _words(ax, f"{fixed(share.value)} {in_brackets(share.lower, share.upper)}", (row, "right", "ink"))


def _words(ax: Axes, text: str, place: tuple[float, str, str], *, weight: str = "normal") -> None:
    """A text left or right of the axes, in line with a row."""
    row, side, colour = place
    width = ax.bbox.width * 72 / ax.figure.dpi
    at = -LABELS + 2 if side == "left" else width + 6
    ax.annotate(
        text,
        (0, row),
        xycoords=("axes fraction", "data"),
        xytext=(at if weight == "bold" or side == "right" else at + 8, 0),
        textcoords="offset points",
        va="center",
        color=LIGHT[colour],
        fontweight=weight,
        fontsize=9.5 if side == "right" else 11,
        annotation_clip=False,
    )


def _key(ax: Axes) -> None:
    """What the marks mean, below everything."""
    ax.plot([], [], "|", color=LIGHT["ink"], markersize=11, markeredgewidth=1.6, label=NULL)
    ax.plot([], [], "o", color=LIGHT["soft"], markerfacecolor=LIGHT["paper"], markersize=7, label="not seen at 5%")
    width, height = (side * 72 / ax.figure.dpi for side in ax.bbox.size)
    corner = (-LABELS / width, -BELOW / height)
    ax.legend(loc="lower left", bbox_to_anchor=corner, ncols=2, borderaxespad=0, fontsize=9.5)
