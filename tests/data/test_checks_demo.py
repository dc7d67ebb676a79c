"""Every planted mistake of the dirty demo set is found, and the clean set raises no error."""

from __future__ import annotations

import time
from functools import cache
from pathlib import Path

import pandas as pd
import pytest

from carrylab.data.checks import REGISTRY, Check, check_market
from carrylab.data.read import read_market
from carrylab.errors import DataError
from carrylab.runner import build
from carrylab.study import read_study

DEMO = Path(__file__).resolve().parents[2] / "datasets_demo"
# A month twice is counted by the ledger, which has no dates of it; changes begin one month after levels.
NO_DATE, ONE_LATER = {"D1"}, {"One month late", "Undeclared peg", "Total return a month late"}
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
    own = [one for one in seen if (one.id, one.level, one.file, one.series) == wanted]
    assert len(own) == 1
    if planted["check"] not in NO_DATE:
        first = "1996-02" if planted["market"] in ONE_LATER else planted["first"]
        assert (own[0].first, own[0].last) == (first, planted["last"])


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


def test_the_load_checks_are_fast() -> None:
    # The zero yields of the demo set have 440,000 rows; .15 s where this was written, with room for slower machines.
    data = read_market(read_study(DEMO / "clean" / "study.toml").markets[0])
    start = time.perf_counter()
    check_market(data)
    assert time.perf_counter() - start < 1.5


def test_every_check_of_the_registry_is_planted() -> None:
    planted = {row["check"] for row in KEY} - {"I1"}
    # L1 is about what a study declares, and is tested where declarations are.
    named = {"D6", "D7", "D8"} | set(REGISTRY) - {"D6-D8", "L1"}
    assert planted == named
