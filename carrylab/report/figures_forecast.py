"""Whether the forecasts would have been better than the mean of the past, date by date."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from carrylab.report.figure import Panel, axes_in, day_of, sample_of, source_of
from carrylab.report.looks import LIGHT
from carrylab.report.numbers import fixed
from carrylab.report.side_by_side import columns_of

if TYPE_CHECKING:
    from matplotlib.figure import Figure as Canvas

    from carrylab.evidence.pictures import Picture

HEIGHT = 270.0
RUNNING, R2 = "running difference", "R2 against the historical mean"
STYLES = {"recursive": "-", "rolling": (0, (4, 1.5))}


def forecast_panels(findings: pd.DataFrame, _pictures: Sequence[Picture]) -> Iterator[Panel]:
    """One panel for each market whose own spread was used to forecast."""
    rows = findings[findings["section"] == "forecast"]
    for number, column in enumerate(columns_of(findings), 1):
        own = rows[(rows["market"] == column.market) & (rows["parity"] == column.parity)]
        own = own[own["horizon"] == column.horizon]
        running = own[own["term"].str.startswith(RUNNING)]
        if len(running):
            in_percent = column.parity != "columns"
            yield Panel(
                name=f"forecast-{number}",
                title=column.market,
                finding=_said(own),
                source=f"{source_of(findings, column.market)}{sample_of(own[own['term'] == R2].iloc[0])} Origins "
                "of the forecasts, not of what trained them.",
                height=HEIGHT,
                draw=lambda canvas, found=(running, in_percent): _draw(canvas, *found),  # type: ignore[misc]
            )


def _said(rows: pd.DataFrame) -> str:
    """R2 out of sample by scheme, and who was better in the end."""
    said = []
    for sample, own in rows.groupby("sample", sort=False):
        found = own[(own["term"] == R2) & (own["group"] == "pooled") & (own["role"] == "return")]
        ended = own.loc[own["term"].str.startswith(RUNNING), "estimate"]
        if len(found) and len(ended):
            better = "the spread" if ended.iloc[-1] > 0 else "the mean"
            said.append(f"{sample} {fixed(found['estimate'].iloc[0], 3)}, {better} better in the end")
    return f"Out-of-sample R2 of the excess return against the historical mean: {'; '.join(said)}."


def _draw(canvas: Canvas, rows: pd.DataFrame, in_percent: bool) -> None:
    ax = axes_in(canvas, (56, 44, 8, 32))
    ax.axhline(0, color=LIGHT["soft"], linewidth=1)
    for sample, own in rows.groupby("sample", sort=False):
        days = np.array([day_of(str(label)) for label in own["last"]])
        values = own["estimate"].to_numpy() * (1e4 if in_percent else 1)
        ax.plot(days, values, color=LIGHT["paid"], linewidth=1.7, linestyle=STYLES[str(sample)], label=str(sample))
    ax.set_xlabel("origin of the forecast")
    ax.set_title(f"squared errors of the mean less the spread's{', %²' if in_percent else ''}", pad=20)
    ax.legend(loc="lower left", bbox_to_anchor=(0, 1), ncols=2, borderaxespad=0.1)
