"""Currency parities in numbers worked by hand: every direction, unit and one-period outcome."""

import math

import numpy as np
import pytest
from markets_built import built, leg, market, one, steps_summed, table

from carrylab.errors import DataError

SPOT = {("AAA",): [1.10, 1.12, 1.05, 1.07, 1.08]}
CHANGE = math.log(1.12 / 1.10)
RATES = {("HHH", "1m"): [2.4] * 5, ("AAA", "1m"): [6.0] * 5}


def spot(**declared):
    return table("spot", "currency", SPOT, quote="home per foreign", **declared)


def deposits(rates=RATES, **declared):
    return table("deposits", "currency tenor", rates, unit="percent", **declared)


def forwards(prices, **declared):
    return table("forwards", "currency tenor", prices, **{"quote": "home per foreign", **declared})


def row(parity, t: int = 0) -> list[float]:
    return [float(values[t, 0]) for values in (parity.signal, *(leg.values for leg in parity.legs))]


def test_uncovered_interest_by_hand() -> None:
    parity = one(market("currencies", "uncovered-interest", spot(), deposits(), horizons="1m"))
    # (6 - 2.4)/12 percent = .003 a month; the foreign currency rises by ln(1.12/1.10).
    assert row(parity) == pytest.approx([0.003, CHANGE + 0.003, CHANGE], abs=1e-15)
    assert [(leg.name, leg.role, leg.weight, leg.null) for leg in parity.legs] == [
        ("excess return", "return", 1.0, 0.0),
        ("foreign appreciation", "fundamental", -1.0, -1.0),
    ]
    assert parity.signal_name == "rate differential"
    (entity,) = parity.entities
    assert (entity.name, entity.economy, entity.currency) == ("AAA", "EA", "AAA")


def test_each_currency_accrues_by_its_own_day_count() -> None:
    counted = deposits(compounding="simple", day_count={"HHH": "act/360", "others": "act/365f"})
    parity = one(market("currencies", "uncovered-interest", spot(), counted, horizons="1m"))
    # From 31 January to 29 February 2000 are 29 days.
    expected = math.log(1 + 0.06 * 29 / 365) - math.log(1 + 0.024 * 29 / 360)
    assert parity.signal[0, 0] == pytest.approx(expected, abs=1e-15)


@pytest.mark.parametrize(
    ("prices", "declared"),
    [
        ({("AAA", "1m"): [1.097] * 5}, {}),
        ({("AAA", "1m"): [1 / 1.097] * 5}, {"quote": "foreign per home"}),
        ({("AAA", "1m"): [-30, -230, 470, 270, 170]}, {"quote": "points", "scale": {"others": 10000.0}}),
    ],
)
def test_forward_discount_by_hand(prices, declared) -> None:
    parity = one(market("currencies", "forward-discount", spot(), forwards(prices, **declared), horizons="1m"))
    # A foreign currency cheaper forward than spot pays more interest: the signal is above zero.
    expected = [math.log(1.10 / 1.097), math.log(1.12 / 1.097), CHANGE]
    assert row(parity) == pytest.approx(expected, abs=1e-12)
    assert parity.signal_name == "forward discount"


def test_carry_is_the_rate_differential_or_the_discount_where_there_are_no_rates() -> None:
    by_rates = one(market("currencies", "carry", spot(), deposits(), horizons="1m"))
    assert row(by_rates) == pytest.approx([0.003, CHANGE + 0.003, CHANGE], abs=1e-15)
    assert by_rates.legs[1].name == "price change beyond the carry"
    by_forwards = one(market("currencies", "carry", spot(), forwards({("AAA", "1m"): [1.097] * 5}), horizons="1m"))
    assert by_forwards.signal[0, 0] == pytest.approx(math.log(1.10 / 1.097), abs=1e-15)


def test_over_one_period_the_one_period_return_is_the_leg() -> None:
    parity = one(market("currencies", "uncovered-interest", spot(), deposits(), horizons="1m"))
    for part in parity.legs:
        summed = steps_summed(parity, part)[:-1]
        np.testing.assert_allclose(summed, (part.values - part.null * parity.signal)[:-1], atol=1e-16)
    assert parity.notes == ()


def test_a_month_s_return_of_a_longer_horizon_takes_the_month_s_rate() -> None:
    rates = {**RATES, ("HHH", "3m"): [3.0] * 5, ("AAA", "3m"): [9.0] * 5}
    parity = one(market("currencies", "uncovered-interest", spot(), deposits(rates), horizons="3m"))
    assert parity.signal[0, 0] == pytest.approx(0.015, abs=1e-15)
    assert parity.legs[0].one_step[1, 0] == pytest.approx(CHANGE + 0.003, abs=1e-15)
    assert np.isnan(parity.legs[0].one_step[0, 0])
    assert parity.notes == ()


def test_without_a_month_s_rate_the_spread_is_earned_in_equal_parts_to_the_end_of_the_sample() -> None:
    rates = {("HHH", "3m"): [3.0] * 5, ("AAA", "3m"): [9.0] * 5}
    parity = one(market("currencies", "uncovered-interest", spot(), deposits(rates), horizons="3m"))
    changes = np.diff(np.log(SPOT["AAA",]))
    # A third of .015 in every month, also in those after the last origin whose outcome is known.
    np.testing.assert_allclose(parity.legs[0].one_step[1:, 0], changes + 0.005, atol=1e-15)
    np.testing.assert_allclose(steps_summed(parity, parity.legs[0])[:2], parity.legs[0].values[:2], atol=1e-15)
    assert parity.notes == (
        "one-period excess returns take the 3m spread in equal parts, as no one-period rate is quoted",
    )


def test_averaged_spot_rates_have_no_one_period_returns() -> None:
    parity = one(market("currencies", "uncovered-interest", spot(timing="average"), deposits(), horizons="1m"))
    assert parity.legs[0].one_step is None
    assert "period averages" in parity.notes[0]


@pytest.mark.parametrize(
    ("rule", "differential", "note"),
    [
        # Between 1m at 3.6 and 3m at 6 percent: 4.8 at 2m.
        ("linear in rate", 0.048, "deposits of 2m are linear in the rate between quoted lengths"),
        # 1m and 3m are equally near; the shorter one stands in.
        ("nearest", 0.036, "deposits of 1m stand in for 2m"),
    ],
)
def test_a_length_that_is_not_quoted(rule: str, differential: float, note: str) -> None:
    rates = {**RATES, ("HHH", "3m"): [3.0] * 5, ("AAA", "3m"): [9.0] * 5}
    data = market("currencies", "uncovered-interest", spot(), deposits(rates), horizons="2m", missing_tenor=rule)
    parity = one(data)
    assert parity.signal[0, 0] == pytest.approx(differential / 6, abs=1e-15)
    assert parity.notes == (note,)


def test_a_length_nearer_to_the_shorter_of_two() -> None:
    rates = {("HHH", n): [0.0] * 5 for n in ("1m", "4m")} | {("AAA", "1m"): [3.0] * 5, ("AAA", "4m"): [6.0] * 5}
    options = {"horizons": "2m", "missing_tenor": "linear in rate"}
    parity = one(market("currencies", "uncovered-interest", spot(), deposits(rates), **options))
    # A third of the way from 3 to 6 percent, for two months.
    assert parity.signal[0, 0] == pytest.approx(0.04 / 6, abs=1e-15)


def test_the_discount_is_interpolated_per_year_and_not_the_price() -> None:
    prices = {("AAA", "1m"): [1.097] * 5, ("AAA", "3m"): [1.085] * 5}
    options = {"horizons": "2m", "missing_tenor": "linear in rate"}
    parity = one(market("currencies", "forward-discount", spot(), forwards(prices), **options))
    per_year = (12 * math.log(1.10 / 1.097) + 4 * math.log(1.10 / 1.085)) / 2
    assert parity.signal[0, 0] == pytest.approx(per_year / 6, abs=1e-15)


def test_trading_days_are_compared_with_quoted_lengths_by_252_a_year() -> None:
    rates = {key: [value[0]] * 40 for key, value in RATES.items()}
    walk = {("AAA",): np.exp(0.01 * np.arange(40))}
    days = {"interval": "day"}
    data = market(
        "currencies",
        "uncovered-interest",
        table("spot", "currency", walk, quote="home per foreign", **days),
        deposits(rates, **days),
        horizons="21d",
        **days,
    )
    parity = one(data)
    # 21 of 252 days are a month: the 1m rate serves, and nothing stands in for it.
    assert row(parity) == pytest.approx([0.003, 0.21 + 0.003, 0.21], abs=1e-14)
    assert parity.legs[0].one_step[1, 0] == pytest.approx(0.01 + 0.003 / 21, abs=1e-15)
    with pytest.raises(DataError, match=r"no deposits of 5d \(trading days\); quoted are 1m"):
        built(
            market(
                "currencies",
                "uncovered-interest",
                *(t for found in data.tables.values() for t in found),
                horizons="5d",
                **days,
            )
        )


TWO = table("spot", "currency", {("AAA",): [1.0] * 5, ("BBB",): [2.0] * 5}, quote="home per foreign")
UNEVEN = {
    **{("HHH", tenor): [1.2] * 5 for tenor in ("1m", "2m", "3m")},
    **{("AAA", tenor): [2.4] * 5 for tenor in ("1m", "2m", "3m")},
    ("BBB", "1m"): [3.6] * 5,
    ("BBB", "3m"): [6.0] * 5,
}


def test_every_currency_is_filled_between_its_own_lengths() -> None:
    options = {"horizons": "2m", "missing_tenor": "linear in rate"}
    parity = one(market("currencies", "uncovered-interest", TWO, deposits(UNEVEN), **options))
    # AAA quotes 2.4 at 2m; BBB stands halfway between 3.6 and 6; home pays 1.2 percent.
    np.testing.assert_allclose(parity.signal[0], [0.012 / 6, 0.036 / 6], atol=1e-15)
    assert parity.notes == ("deposits of 2m are linear in the rate between quoted lengths (BBB)",)


def test_a_currency_without_the_length_is_a_hole_and_noted() -> None:
    parity = one(market("currencies", "uncovered-interest", TWO, deposits(UNEVEN), horizons="2m"))
    assert parity.signal[0, 0] == pytest.approx(0.012 / 6, abs=1e-15)
    assert np.isnan(parity.signal[:, 1]).all()
    assert parity.notes == ("deposits of 2m are not quoted (BBB)",)
    without = {key: rates for key, rates in UNEVEN.items() if key[0] != "BBB"}
    parity = one(market("currencies", "uncovered-interest", TWO, deposits(without), horizons="2m"))
    assert np.isnan(parity.signal[:, 1]).all()
    assert parity.notes == ("no deposits (BBB)",)
    parity = one(market("currencies", "forward-discount", TWO, forwards({("AAA", "1m"): [1.1] * 5}), horizons="1m"))
    assert parity.notes == ("no forwards (BBB)",)


def test_only_a_currency_without_a_month_s_rate_earns_its_spread_in_equal_parts() -> None:
    rates = {key: values for key, values in UNEVEN.items() if key != ("BBB", "1m")}
    parity = one(market("currencies", "uncovered-interest", TWO, deposits(rates), horizons="3m"))
    # AAA a month at 2.4 less 1.2 percent; BBB a third of three months at 6 less 1.2 percent. Spot rates stand still.
    np.testing.assert_allclose(parity.legs[0].one_step[1:], [[0.001, 0.004]] * 4, atol=1e-15)
    assert parity.notes == (
        "one-period excess returns take the 3m spread in equal parts, as no one-period rate is quoted (BBB)",
    )


def test_a_hole_in_spot_leaves_the_one_period_return_of_a_quoted_forward() -> None:
    holed = table("spot", "currency", {("AAA",): [1.1, math.nan, 1.2, 1.2, 1.2]}, quote="home per foreign")
    prices = {("AAA", "1m"): [1.0] * 5, ("AAA", "3m"): [1.0] * 5}
    parity = one(market("currencies", "forward-discount", holed, forwards(prices), horizons="3m"))
    # s_2 - f_1 needs no spot rate at 1.
    np.testing.assert_allclose(parity.legs[0].one_step[2, 0], math.log(1.2), atol=1e-15)
    assert np.isnan(parity.legs[0].one_step[1, 0])


def test_a_hole_in_the_spot_rate_is_a_hole_of_its_two_returns() -> None:
    holed = table("spot", "currency", {("AAA",): [1.10, math.nan, 1.05, 1.07, 1.08]}, quote="home per foreign")
    parity = one(market("currencies", "uncovered-interest", holed, deposits(), horizons="1m"))
    np.testing.assert_array_equal(np.isnan(leg(parity, "excess return").values[:, 0]), [True, True, False, False, True])
    np.testing.assert_array_equal(np.isnan(parity.legs[0].one_step[:, 0]), [True, True, True, False, False])


@pytest.mark.parametrize(
    ("name", "tables", "line"),
    [
        ("uncovered-interest", (spot(), forwards({("AAA", "1m"): [1.1] * 5})), "uncovered-interest needs deposits"),
        ("forward-discount", (spot(), deposits()), "forward-discount needs forwards; declare them in its data"),
        (
            "uncovered-interest",
            (spot(), deposits({("AAA", "1m"): [1.0] * 5})),
            "market 'M': no deposits of the home currency 'HHH'; found AAA",
        ),
        (
            "uncovered-interest",
            (spot(), deposits({("AAA", "1m"): [1.0] * 5, ("HHH", "3m"): [1.0] * 5})),
            "market 'M': no deposits of 1m of the home currency 'HHH', missing_tenor is 'exact'; quote that length, or "
            "choose other horizons or another missing_tenor",
        ),
        (
            "uncovered-interest",
            (spot(), deposits({("AAA", "3m"): [1.0] * 5, ("HHH", "3m"): [1.0] * 5})),
            "market 'M': no deposits of 1m; quoted are 3m, missing_tenor is 'exact'; quote that length, or set "
            'missing_tenor to "linear in rate", which fills between the quoted lengths only, or to "nearest"',
        ),
    ],
)
def test_what_is_missing_is_one_line(name: str, tables, line: str) -> None:
    with pytest.raises(DataError) as refused:
        built(market("currencies", name, *tables, horizons="1m"))
    assert line in str(refused.value)
    assert "\n" not in str(refused.value)
