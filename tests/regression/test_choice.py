"""The automatic choice: every row of the table of situations, and the words that say why."""

import math
from dataclasses import replace

import pytest

from carrylab.regression.choice import Facts, choose

SERIES = Facts(entities=1, ratio=0.1, windows=40.0, one_period=True, curves=0)
PANEL = replace(SERIES, entities=10)


@pytest.mark.parametrize(
    ("facts", "test", "second", "draws", "needed"),
    [
        (SERIES, "one-period", "instrument", "second opinion", False),
        (PANEL, "one-period", "instrument", "beside", False),
        (replace(SERIES, ratio=-0.3), "instrument", "instrument, cosine", "second opinion", True),
        (replace(PANEL, ratio=0.31), "instrument", "instrument, cosine", "headline", True),
        (replace(PANEL, windows=9.9), "instrument", "instrument, cosine", "headline", True),
        (replace(PANEL, curves=10), "instrument", "one-period", "second opinion", False),
        (replace(PANEL, curves=1), "instrument", "one-period", "headline", False),
        (replace(PANEL, one_period=False), "cosine", "instrument, cosine", "beside", False),
    ],
)
def test_each_situation_has_its_errors(facts: Facts, test: str, second: str, draws: str, needed: bool) -> None:
    found = choose(facts)
    assert (found.test, found.second, found.draws, found.needed) == (test, second, draws, needed)


def test_the_reason_is_said_with_its_number() -> None:
    assert choose(replace(PANEL, ratio=-1.25)).why == "bias is -1.25 standard errors"
    assert choose(replace(PANEL, windows=5.0)).why == "there are only 5.0 independent windows"
    assert choose(replace(PANEL, ratio=math.nan)).why == "bias cannot be predicted"
