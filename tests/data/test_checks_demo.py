"""Every planted mistake of the dirty demo set is found, and the clean set raises no error."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import pandas as pd
import pytest

from carrylab.data.checks import Check
from carrylab.errors import DataError
from carrylab.runner import build
from carrylab.study import read_study

DEMO = Path(__file__).resolve().parents[2] / "datasets_demo"
# QT's market was closed, QW leaves, and the peg of QMTQSG breaks, which controls.toml does not declare.
TRUE_WARNINGS = {("D2", "QT"), ("S1", "QW"), ("D6", "QM")}
KEY = pd.read_csv(DEMO / "dirty" / "key.csv", keep_default_na=False).to_dict("records")


@cache
def found(folder: str, study: str, market: str) -> tuple[Check, ...]:
    """What the checks see in one market; a refusal on reading counts as the error D1."""
    whole = read_study(DEMO / folder / study)
    (chosen,) = [one for one in whole.markets if one.name == market]
    try:
        return build(chosen, whole.economies).checks
    except DataError as refused:
        file, _, rest = str(refused).partition(":")
        series = next((code for code in ("QT",) if f"give {code} " in rest), "")
        return (Check("D1", "error", file, series, "", "", str(refused), ""),)


@pytest.mark.parametrize("planted", KEY, ids=[f"{row['check']}-{row['market']}" for row in KEY])
def test_a_planted_mistake_is_found(planted: dict[str, str]) -> None:
    seen = found("dirty", planted["study"], planted["market"])
    wanted = (planted["check"], planted["level"], planted["file"], planted["series"])
    assert wanted in [(one.id, one.level, one.file, one.series) for one in seen]


@pytest.mark.parametrize("planted", KEY, ids=[f"{row['check']}-{row['market']}" for row in KEY])
def test_nothing_else_is_an_error(planted: dict[str, str]) -> None:
    seen = found("dirty", planted["study"], planted["market"])
    allowed = {planted["check"], *planted["also"].split()}
    assert {one.id for one in seen if one.level == "error"} <= allowed


@pytest.mark.parametrize("study", ["study.toml", "controls.toml"])
def test_the_clean_set_has_no_error_and_few_warnings(study: str) -> None:
    whole = read_study(DEMO / "clean" / study)
    seen = [one for market in whole.markets for one in found("clean", study, market.name)]
    assert not [one.line() for one in seen if one.level == "error"]
    assert {(one.id, one.series[:2]) for one in seen if one.level == "warning"} <= TRUE_WARNINGS
