"""What a run returns: findings, the built markets behind them, and ways to look at and keep them."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from carrylab import record
from carrylab.audit import Audit
from carrylab.data.checks import Check
from carrylab.evidence.case import Case
from carrylab.evidence.pictures import picture_of
from carrylab.markets.parity import Parity
from carrylab.options import Study
from carrylab.report.figure import Figure
from carrylab.report.figures import figures_of
from carrylab.report.html import html_table
from carrylab.report.side_by_side import side_by_side
from carrylab.report.text import report_text


@dataclass(frozen=True, eq=False, slots=True)
class Results:
    """One run. `findings` is a tidy table, one row per coefficient or statistic, under a unique key.

    `checks` by market, `parities` as built, `cases` with their regressions, `audit` where it was asked for, `timings`
    in seconds by step.
    """

    study: Study
    findings: pd.DataFrame
    checks: Mapping[str, tuple[Check, ...]]
    parities: tuple[Parity, ...]
    cases: tuple[Case, ...]
    audit: Audit | None
    timings: Mapping[str, float]

    def table(self, parity: str | None = None) -> pd.DataFrame:
        """The side-by-side view, one column a market; `parity` names one that several markets share, such as carry."""
        found = side_by_side(self.findings, parity=parity)
        if found is None:
            return pd.DataFrame()
        rows = [[cell.text.strip() for cell in line.cells] or [""] * len(found.head) for line in found.filled()]
        return pd.DataFrame(rows, columns=list(found.head), index=[line.label for line in found.filled()])

    def report(self, width: int = 100) -> str:
        """The whole report as plain text, `width` columns wide."""
        audited = () if self.audit is None else self.audit.lines()
        return report_text(self.findings, title=self.study.title, width=width, audit=audited)

    def panel(self) -> pd.DataFrame:
        """Signal and legs of every row, so that anyone can fit the regressions again."""
        return pd.concat([_panel_of(parity) for parity in self.parities], ignore_index=True)

    def figures(self) -> list[Figure]:
        """Every figure that these findings have something for."""
        return figures_of(self.findings, [picture_of(case) for case in self.cases])

    def page(self) -> str:
        """The whole report as one self-contained page of HTML with all figures."""
        from carrylab.report.page import Recipe, report_page

        account = self._account()
        recipe = Recipe(
            study=self.study.text,
            command=f"carrylab run {self.study.path.name}{'' if self.audit is None else ' --audit'}",
            versions=account["versions"],
            hashes=account["data_sha256"],
            seeds=account["seeds"],
        )
        audited = () if self.audit is None else self.audit.lines()
        return report_page(self.findings, recipe, title=self.study.title, audit=audited, figures=self.figures())

    def save(
        self,
        directory: str | os.PathLike[str],
        *,
        parquet: bool = False,
        width: int = 100,
        page: bool = True,
        figures: Sequence[str] = (),
    ) -> Path:
        """Write the run folder: report.txt, findings.csv, panel.csv, run.json; findings.parquet with pyarrow.

        `page`: report.html too. `figures`: every figure as a file in each of these formats, of svg, pdf and png.
        """
        more = {"report.html": self.page().encode()} if page else {}
        if figures:
            from carrylab.report.figures_files import figure_files

            more |= {f"figures/{name}": content for name, content in figure_files(self.figures(), figures)}
        timings = {"seconds": {step: round(spent, 3) for step, spent in self.timings.items()}}
        run = record.Run(self.report(width), self.findings, self.panel(), self._account() | timings, more)
        return record.save(run, Path(directory), parquet=parquet)

    def _account(self) -> dict[str, Any]:
        """Study text, SHA-256 of the data files, versions and seeds."""
        files = [s.path for market in self.study.markets for found in market.sources.values() for s in found]
        files += [source.path for market in self.study.markets for source in market.controls]
        return {
            "study": self.study.text,
            "data_sha256": record.hashes(files),
            "versions": record.versions(),
            "seeds": {market.name: market.inference.seed for market in self.study.markets},
        }

    def __repr__(self) -> str:
        return self.report()

    def _repr_html_(self) -> str:
        found = side_by_side(self.findings, title=self.study.title)
        return html_table(found) if found else ""


def _panel_of(parity: Parity) -> pd.DataFrame:
    """Long rows of one parity in which the signal stands: date, entity, signal, and the legs by number."""
    t, i = np.nonzero(np.isfinite(parity.signal))
    labels = np.array([parity.calendar.label(row) for row in range(len(parity.calendar))])
    names = np.array([entity.name for entity in parity.entities])
    place = {"market": parity.market, "parity": parity.name, "horizon": str(parity.horizon)}
    frame = pd.DataFrame({name: pd.Categorical([text]).repeat(len(t)) for name, text in place.items()})
    frame["date"], frame["entity"], frame["signal"] = labels[t], names[i], parity.signal[t, i]
    for leg in parity.legs:
        frame[leg.name] = leg.values[t, i]
    return frame
