"""What a run returns: findings, the built markets behind them, and ways to look at and keep them."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from carrylab import record
from carrylab.audit import Audit
from carrylab.data.checks import Check
from carrylab.markets.parity import Parity
from carrylab.options import Study
from carrylab.report.html import html_table
from carrylab.report.table import Table, side_by_side
from carrylab.report.text import report_text


@dataclass(frozen=True, eq=False, slots=True)
class Results:
    """One run. `findings` is a tidy table, one row per coefficient or statistic, under a unique key.

    `checks` per market, `parities` as built, `audit` where it was asked for, `timings` in seconds by step.
    """

    study: Study
    findings: pd.DataFrame
    checks: Mapping[str, tuple[Check, ...]]
    parities: tuple[Parity, ...]
    audit: Audit | None
    timings: Mapping[str, float]

    def table(self, parity: str | None = None) -> pd.DataFrame:
        """The side-by-side view, one column a market; `parity` names one that several markets share, such as carry."""
        return _as_frame(side_by_side(self.findings, parity=parity))

    def report(self, width: int = 100) -> str:
        """The whole report as plain text, `width` columns wide."""
        audited = "" if self.audit is None else self.audit.text()
        return report_text(self.findings, title=self.study.title, width=width, audit=audited)

    def panel(self) -> pd.DataFrame:
        """Signal and legs of every row, so that anyone can fit the regressions again."""
        return pd.concat([_panel_of(parity) for parity in self.parities], ignore_index=True)

    def save(self, directory: str | os.PathLike[str], *, parquet: bool = False, width: int = 100) -> Path:
        """Write the run folder: report.txt, findings.csv, panel.csv and run.json; findings.parquet on request."""
        return record.save(self, Path(directory), parquet=parquet, width=width)

    def __repr__(self) -> str:
        return self.report()

    def _repr_html_(self) -> str:
        return html_table(side_by_side(self.findings))
