"""The answer in three sentences says what the findings say, in every case a market can be in."""

from __future__ import annotations

import math
from dataclasses import replace

import factory
import pandas as pd
import pytest
from factory import BONDS, CURRENCIES, EQUITIES, Legs, Place

from carrylab.findings import DOUBTFUL, to_frame
from carrylab.report.answer import answer, answer_lines
from carrylab.report.table import Cell

BONDS_PLACE = Place("Bonds", "forward-spot")


def legs(paid: float, error: float) -> Legs:
    """Two legs whose shares are `paid` and what is left, with one error."""
    changed = {
        name: (role, weight, null, paid if role == "return" else weight * (1 - paid), error, r2)
        for name, (role, weight, null, _, _, r2) in BONDS.legs.items()
    }
    return replace(BONDS, legs=changed)


def lines(*columns: tuple[str, Legs]) -> list[str]:
    rows = [row for name, own in columns for row in factory.column(Place(name, "forward-spot"), own)]
    return answer_lines(to_frame(rows))


def test_three_markets() -> None:
    """Both tests of the factory: p, and half as large again plus a hundredth."""
    assert answer_lines(factory.three_markets()) == [
        "Over 12 months the spread is paid out in Sovereign bonds, Currencies and Equity indices, where each point of "
        "it was followed by 0.83 (standard error 0.21), 1.62 (0.45) and 0.29 (0.08) points of excess return.",
        "In no market is the spread seen to come true in the fundamental; the fundamental moved the other way: "
        "-0.06 (0.02) in Equity indices; what came true is no more than chance: 0.17 (0.21) in Sovereign bonds and "
        "-0.62 (0.45) in Currencies; still in the price: 0.80 (0.05) in Equity indices.",
        "How sure: a premium is firm, both its tests below 5%, in Sovereign bonds (p <0.001 and 0.010), Currencies "
        "(p <0.001 and 0.010) and Equity indices (p <0.001 and 0.010); the markets' resolved premium shares differ by "
        "no more than chance (p 0.210); all of it is in sample, on 29 windows that do not overlap.",
    ]


def test_a_market_that_lets_its_spread_come_true() -> None:
    paid, true, sure = lines(("Bonds", legs(0.1, 0.2)))
    assert paid == "Over 12 months no market is seen to pay its spread out; no premium is seen: 0.10 (0.20) in Bonds."
    assert true == "The spread comes true in the fundamental: 0.90 (0.20) in Bonds."
    # 2 (1 - Phi(.5)) = .617, and half as large again plus .01.
    assert sure.startswith("How sure: no test is below 5% in Bonds (p 0.617 and 0.936);")


def test_a_loss_is_not_called_a_premium() -> None:
    paid, _, sure = lines(("Bonds", legs(-0.9, 0.2)))
    assert paid.startswith("Over 12 months no market is seen to pay its spread out; what followed a wide spread was a ")
    assert paid.endswith("loss: -0.90 (0.20) in Bonds.")
    assert "the loss is below 5% in Bonds" in sure


def test_tests_that_disagree_leave_it_in_doubt() -> None:
    """A p of .037 has a second opinion of .066 in the factory: one below 5%, one above."""
    paid, _, sure = lines(("Bonds", legs(0.5, 0.24)), ("Firm", legs(0.5, 0.1)))
    assert "the spread is paid out in Firm, where" in paid
    assert "whether it is paid is in doubt: 0.50 (0.24) in Bonds." in paid
    assert "the two tests leave it in doubt in Bonds (p 0.037 and 0.066)" in sure


def test_a_p_that_rests_on_too_little_is_never_firm() -> None:
    findings = to_frame(factory.column(BONDS_PLACE, legs(0.9, 0.1)))
    tests = findings["term"] == "nothing paid"
    findings.loc[tests, "note"] = f"{DOUBTFUL}3 independent windows"
    paid, _, sure = answer_lines(findings)
    assert "whether it is paid is in doubt: 0.90 (0.10) in Bonds." in paid
    assert "in doubt in Bonds (p <0.001? and 0.010?); p with a question mark: 3 independent windows; all" in sure


@pytest.mark.parametrize(("paid", "said"), [(0.9, "is paid out in Bonds"), (0.1, "no premium is seen")])
def test_one_test_alone(paid: float, said: str) -> None:
    findings = to_frame(factory.column(BONDS_PLACE, legs(paid, 0.2)))
    alone = findings[findings["rank"] != "second opinion"]
    found = answer_lines(alone)
    assert said in found[0]
    assert ("the one test of the premium is below 5% in Bonds (p <0.001);" in found[2]) is (paid == 0.9)


def test_legs_without_an_identity_have_no_shares() -> None:
    findings = to_frame(factory.column(Place("Own", "columns"), BONDS))
    keep = (findings["section"] == "shares") & findings["term"].isin(["signal", "const"])
    bare = findings[keep & (findings["rank"] == "headline")].assign(weight=math.nan, share=math.nan)
    assert answer_lines(bare) == ["In Own no identity ties spread and outcomes together, so there are no shares."]
    assert answer_lines(findings[findings["section"] == "ledger"]) == []


def test_horizons_that_differ_are_not_named() -> None:
    rows = [
        *factory.column(BONDS_PLACE, BONDS),
        *factory.column(Place("Currencies", "uncovered-interest", horizon="3m"), CURRENCIES),
    ]
    assert answer_lines(to_frame(rows))[0].startswith("The spread is paid out in Bonds and Currencies")


def test_a_horizon_of_one_period_is_written_as_one() -> None:
    rows = factory.column(replace(BONDS_PLACE, horizon="1q"), BONDS)
    assert answer_lines(to_frame(rows))[0].startswith("Over 1 quarter the spread")


def test_numbers_of_the_sentences_keep_their_full_value() -> None:
    findings = pd.DataFrame(to_frame(factory.column(Place("E", "dividend-price"), EQUITIES)))
    values = [part.value for sentence in answer(findings) for part in sentence if isinstance(part, Cell)]
    # The share paid, its error, and what is carried over: .968 x .8256.
    assert 0.286 in values
    assert 0.077 in values
    assert any(math.isclose(value, 0.968 * 0.8256) for value in values)
