"""The results contract: one row per coefficient or statistic, in fixed columns, under a unique key."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np
import pandas as pd

TEXTS: tuple[str, ...] = (
    "section",
    "rank",
    "market",
    "parity",
    "leg",
    "role",
    "horizon",
    "interval",
    "group",
    "sample",
    "term",
    "first",
    "last",
    "method",
    "note",
)
COLUMNS: tuple[str, ...] = (
    "section",
    "rank",
    "market",
    "parity",
    "leg",
    "role",
    "horizon",
    "interval",
    "group",
    "sample",
    "term",
    "estimate",
    "std_error",
    "statistic",
    "df",
    "p_value",
    "lower",
    "upper",
    "null",
    "weight",
    "share",
    "r2",
    "n_dates",
    "n_entities",
    "n_obs",
    "first",
    "last",
    "lags",
    "method",
    "note",
    "p_holm",
    "p_fdr",
    "p_stepdown",
    "n_tests",
)
COUNTS: tuple[str, ...] = ("n_dates", "n_entities", "n_obs", "lags", "n_tests")
KEY: tuple[str, ...] = ("section", "rank", "market", "parity", "leg", "horizon", "group", "sample", "term")
# How a note begins where the p-value beside it rests on too little; reports mark such a p.
DOUBTFUL = "p in doubt: "
Row = Mapping[str, Any]


def to_frame(rows: Iterable[Row]) -> pd.DataFrame:
    """Rows to the findings table: texts default to "", numbers to NaN; the key must be unique."""
    given = list(rows)
    columns = {name: [row.get(name) for row in given] for name in COLUMNS}
    table = pd.DataFrame(
        {
            name: [value or "" for value in values]
            if name in TEXTS
            else np.array([np.nan if value is None else value for value in values], dtype=np.float64)
            for name, values in columns.items()
        }
    )
    twice = table[table.duplicated(list(KEY), keep=False)]
    if len(twice):
        raise ValueError(f"two findings share one key: {twice.iloc[0][list(KEY)].to_dict()}")
    return table
