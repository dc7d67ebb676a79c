"""The automatic choice of errors for the test that nothing is paid: from bias, windows and the kind of sample."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from carrylab.regression.bias import LARGE_BIAS, VERY_FEW_WINDOWS

Rank = Literal["headline", "second opinion", "beside"]


@dataclass(frozen=True, slots=True)
class Choice:
    """Which errors test that nothing is paid, which stand beside them, what draws are where they are made, and why.

    `needed`: draws are called for, because least squares with 1B would reject too often.
    """

    test: str
    second: str
    draws: Rank
    why: str
    needed: bool = False


@dataclass(frozen=True, slots=True)
class Facts:
    """What the choice rests on: entities, bias over standard error, windows T/h, one-period outcomes, and curves.

    `curves`: economies whose yield curves the signal is read from, none where it is no bond spread.
    """

    entities: int
    ratio: float
    windows: float
    one_period: bool
    curves: int


def choose(facts: Facts) -> Choice:
    """Errors whose size holds in simulated worlds like the sample (the table of true sizes in the contributor's guide).

    Hodrick's 1B where the signal is not endogenous: |bias| < .3 standard errors and at least ten windows. Otherwise,
    and for bonds, whose curve forecasts itself under the null, the IVX instrument with one-period scores; for panels
    and for the curve of one economy draws under the null come first where they are made. Without one-period outcomes
    equal-weighted cosines.
    """
    panel = facts.entities > 1
    if not facts.one_period:
        return Choice("cosine", "instrument, cosine", "beside", "outcomes of single periods are missing")
    if facts.curves:
        # Draws of one economy's curve hold their size; those of several do not always, so they stand second.
        draws: Rank = "headline" if facts.curves == 1 else "second opinion"
        return Choice("instrument", "one-period", draws, "a curve forecasts itself under the null")
    strong = strength(facts)
    if strong:
        return Choice("instrument", "instrument, cosine", "headline" if panel else "second opinion", strong, True)
    held = f"bias is {facts.ratio:+.2f} standard errors" if not math.isnan(facts.ratio) else "bias cannot be predicted"
    return Choice("one-period", "instrument", "beside" if panel else "second opinion", held)


def strength(facts: Facts) -> str:
    """Why least squares with 1B would reject too often here; empty where it would not."""
    if abs(facts.ratio) >= LARGE_BIAS:
        return f"bias is {facts.ratio:+.2f} standard errors"
    if facts.windows < VERY_FEW_WINDOWS:
        return f"there are only {facts.windows:.1f} independent windows"
    return ""
