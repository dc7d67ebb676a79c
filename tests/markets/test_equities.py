"""Equity parities in numbers worked by hand: dividends and returns of every basis, bills, and the money of an index."""

import math

import numpy as np
import pytest
from markets_built import built, leg, market, one, steps_summed, table

from carrylab.errors import DataError, StudyError
from carrylab.markets.indices import read_equities

ECONOMIES = {"EH": "HHH", "EA": "AAA"}
RHO = 0.96


def prices(values, interval="year", **declared):
    return table("prices", "economy", {("EA",): values}, interval=interval, **declared)


def dividends(values, interval="year", basis="trailing 12 months"):
    return table("dividends", "economy", {("EA",): values}, interval=interval, basis=basis)


def bills(rates, interval="year"):
    return table("deposits", "currency tenor", rates, interval=interval)


def yearly(parity: str, *more, horizons: str = "12m", **options):
    """P 100, 110, 121; D 4, 5, 5.5; the bill at 3, 2, 1 percent."""
    tables = (
        prices([100.0, 110.0, 121.0]),
        dividends([4.0, 5.0, 5.5]),
        bills({("AAA", "12m"): [0.03, 0.02, 0.01], ("HHH", "12m"): [0.05, 0.04, 0.03]}),
    )
    return market("equities", parity, *tables, *more, interval="year", horizons=horizons, **options)


def row(parity) -> list[float]:
    return [float(values[0, 0]) for values in (parity.signal, *(leg.values for leg in parity.legs))]


def test_one_year_of_the_ratio_by_hand() -> None:
    parity = one(yearly("dividend-price", rho=RHO), ECONOMIES)
    later = math.log(5 / 110)
    assert row(parity) == pytest.approx(
        [
            math.log(4 / 100),
            math.log(115 / 100) - 0.03,  # 110 and the dividend 5 for 100, over the bill
            0.03,
            math.log(5 / 4),
            later,
            -(math.log(1 + 110 / 5) + RHO * later),  # what the log-linear form leaves out
        ],
        abs=1e-14,
    )
    assert [(leg.name, leg.role, leg.weight, leg.null) for leg in parity.legs] == [
        ("excess return", "return", 1.0, 0.0),
        ("riskless rate", "fundamental", 1.0, None),
        ("dividend growth", "fundamental", -1.0, None),
        ("future dividend-price ratio", "carried over", RHO, None),
        ("approximation", "approximation", 1.0, None),
    ]
    assert (parity.rho, parity.notes[0]) == (RHO, "rho = 0.9600")
    assert parity.approximation_bound == 0.05


def test_two_years_are_discounted_by_hand() -> None:
    parity = one(yearly("dividend-price", rho=RHO, horizons="24m", tolerance=0.1), ECONOMIES)
    first, second = math.log(115 / 100), math.log(126.5 / 110)
    assert row(parity)[:5] == pytest.approx(
        [
            math.log(0.04),
            first - 0.03 + RHO * (second - 0.02),
            0.03 + RHO * 0.02,
            math.log(5 / 4) + RHO * math.log(5.5 / 5),
            math.log(5.5 / 121),
        ],
        abs=1e-14,
    )
    assert parity.legs[3].weight == pytest.approx(RHO**2)
    assert parity.approximation_bound == pytest.approx(0.1 * (1 + RHO))
    np.testing.assert_allclose(parity.legs[0].step_weights, [1, RHO])


def test_rho_of_the_sample() -> None:
    parity = one(yearly("dividend-price"), ECONOMIES)
    mean = (math.log(4 / 100) + math.log(5 / 110) + math.log(5.5 / 121)) / 3
    assert parity.rho == pytest.approx(1 / (1 + math.exp(mean)), abs=1e-15)
    assert parity.notes[0] == f"rho = {parity.rho:.4f}, from the sample mean"


def test_an_index_left_out_is_left_out_of_rho() -> None:
    def two(role, values, other, **declared):
        return table(role, "economy", {("EA",): values, ("EH",): other}, interval="year", **declared)

    tables = (
        two("prices", [100.0, 110.0, 121.0], [1.0, 1.0, 1.0]),
        two("dividends", [4.0, 5.0, 5.5], [1.0, 1.0, 1.0], basis="trailing 12 months"),
        bills({("AAA", "12m"): [0.03] * 3, ("HHH", "12m"): [0.03] * 3}),
    )
    options = {"interval": "year", "horizons": "12m", "leave_out": ("HHH",)}
    both = one(market("equities", "dividend-price", *tables, **options), ECONOMIES)
    alone = one(yearly("dividend-price"), ECONOMIES)
    assert both.rho == pytest.approx(alone.rho, abs=1e-15)


def test_carry_by_hand() -> None:
    parity = one(yearly("carry"), ECONOMIES)
    assert row(parity) == pytest.approx(
        [
            math.log(1.04) - 0.03,
            math.log(115 / 100) - 0.03,
            math.log(110 / 100),
            math.log(1 + 5 / 110) - math.log(1.04),
        ],
        abs=1e-14,
    )
    assert [(leg.role, leg.weight, leg.null) for leg in parity.legs] == [
        ("return", 1.0, 0.0),
        ("fundamental", -1.0, None),
        ("fundamental", -1.0, None),
    ]


def test_a_quarter_of_carry_earns_a_quarter_of_the_year_s_dividends() -> None:
    tables = (prices([100.0, 110.0], "quarter"), dividends([4.0, 6.0], "quarter"))
    rates = bills({("AAA", "3m"): [0.04, 0.04]}, "quarter")
    parity = one(market("equities", "carry", *tables, rates, interval="quarter", horizons="3m"), ECONOMIES)
    assert row(parity)[:2] == pytest.approx([math.log(1.01) - 0.01, math.log(111.5 / 100) - 0.01], abs=1e-15)
    assert parity.notes[-1] == "dividends over 3m are 0.25 years of the trailing twelve months'"


PAID = np.array([1.0, 2.0, 0.0, 1.0, 1.5, 2.0, 0.5, 1.0])
PRICE = 100.0 + 3.0 * np.arange(8.0)
QUARTERS = {("AAA", "3m"): [0.04] * 8, ("AAA", "12m"): [0.04] * 8}


def quarterly(*tables):
    return market(
        "equities", "dividend-price", prices(PRICE, "quarter"), bills(QUARTERS, "quarter"), *tables,
        interval="quarter", horizons="12m", rho=RHO,
    )  # fmt: skip


def test_dividends_from_a_total_return_index_are_those_paid() -> None:
    index = 50.0 * np.cumprod(np.append(1.0, (PRICE[1:] + PAID[1:]) / PRICE[:-1]))
    by_index = quarterly(table("total_return", "economy", {("EA",): index}, interval="quarter"))
    by_payments = quarterly(dividends(PAID, "quarter", "per period"))
    found, told = read_equities(by_index, ECONOMIES), read_equities(by_payments, ECONOMIES)
    # The last four quarters: 1.0 + 1.5 + 2.0 + .5 at row 6; the payment of row 0 lies before the index begins.
    assert told.dividend[6, 0] == pytest.approx(5.0)
    np.testing.assert_allclose(found.dividend[4:], told.dividend[4:], rtol=1e-12)
    assert np.isnan(found.dividend[:4]).all()
    assert np.isnan(told.dividend[:3]).all()
    np.testing.assert_allclose(found.total, told.total, atol=1e-15)
    assert "dividends are price times the difference of total and price return" in found.notes[0]
    early, late = one(by_index, ECONOMIES), one(by_payments, ECONOMIES)
    whole = np.isfinite(early.legs[0].values) & np.isfinite(early.signal)
    for one_leg, other in zip(early.legs, late.legs, strict=True):
        np.testing.assert_allclose(one_leg.values[whole], other.values[whole], atol=1e-12)


def test_trailing_dividends_are_paid_in_equal_parts() -> None:
    world = read_equities(quarterly(dividends([4.0] * 8, "quarter")), ECONOMIES)
    assert world.total[1, 0] == pytest.approx(math.log((103 + 1) / 100), abs=1e-15)
    assert world.notes == ("one period's dividend is 1/4 of the trailing twelve months'",)


def test_declared_dividends_and_a_total_return_index_each_serve_their_part() -> None:
    index = table("total_return", "economy", {("EA",): 100 * 1.02 ** np.arange(8.0)}, interval="quarter")
    world = read_equities(quarterly(dividends([4.0] * 8, "quarter"), index), ECONOMIES)
    assert world.dividend[5, 0] == 4.0
    assert world.total[5, 0] == pytest.approx(math.log(1.02), abs=1e-15)


def test_a_year_without_dividends_has_no_log_ratio() -> None:
    world = read_equities(quarterly(dividends(np.zeros(8), "quarter", "per period")), ECONOMIES)
    assert np.isnan(world.dividend).all()
    assert world.total[1, 0] == pytest.approx(math.log(1.03), abs=1e-15)


def test_bills_of_a_quarter_are_rolled_through_the_year() -> None:
    rates = 0.01 * np.arange(1.0, 9.0)
    data = market(
        "equities", "dividend-price", prices(PRICE, "quarter"), dividends([4.0] * 8, "quarter"),
        bills({("AAA", "3m"): rates}, "quarter"), interval="quarter", horizons="12m", rho=RHO,
    )  # fmt: skip
    parity = one(data, ECONOMIES)
    riskless = leg(parity, "riskless rate beyond today's")
    assert riskless.values[0, 0] == pytest.approx((0.01 + 0.02 + 0.03 + 0.04) / 4, abs=1e-15)
    # Rolled to the end the year's excess return is the sum of those of its quarters.
    excess = parity.legs[0]
    np.testing.assert_allclose(steps_summed(parity, excess)[:4], excess.values[:4], atol=1e-15)
    assert "the riskless year rolls 3m bills" in parity.notes


def test_on_a_month_calendar_bills_of_a_quarter_are_rolled_each_quarter() -> None:
    rates = 0.01 * np.arange(1.0, 25.0)
    data = market(
        "equities", "dividend-price", prices([100.0] * 24, "month"), dividends([4.0] * 24, "month"),
        bills({("AAA", "3m"): rates}, "month"), horizons="12m", rho=RHO,
    )  # fmt: skip
    parity = one(data, ECONOMIES)
    # The bills of months 0, 3, 6 and 9.
    assert leg(parity, "riskless rate beyond today's").values[0, 0] == pytest.approx(0.22 / 4, abs=1e-15)
    assert "in one-period excess returns deposits of 3m stand in for 1m" in parity.notes


def test_one_period_excess_returns_are_over_the_bill_of_the_period_before() -> None:
    parity = one(quarterly(dividends([4.0] * 8, "quarter")), ECONOMIES)
    assert parity.legs[0].one_step[1, 0] == pytest.approx(math.log(104 / 100) - 0.01, abs=1e-15)
    assert np.isnan(parity.legs[0].one_step[0, 0])


def test_averaged_prices_have_no_one_period_returns() -> None:
    data = market(
        "equities", "carry", prices([100.0, 110.0], timing="average"), dividends([4.0, 5.0]),
        bills({("AAA", "12m"): [0.03, 0.03]}), interval="year", horizons="12m",
    )  # fmt: skip
    parity = one(data, ECONOMIES)
    assert parity.legs[0].one_step is None
    assert "prices are period averages, so there are no one-period errors" in parity.notes


SPOT = table("spot", "currency", {("AAA",): [2.0, 2.2, 2.1]}, interval="year", quote="home per foreign")
FORWARD = table(
    "forwards", "currency tenor", {("AAA", "12m"): [2.04, 2.25, 2.1]}, interval="year", quote="home per foreign"
)
RISE, DISCOUNT = math.log(2.2 / 2.0), math.log(2.04 / 2.0)


@pytest.mark.parametrize(("currency", "gain"), [("home unhedged", RISE), ("home hedged", DISCOUNT)])
def test_the_ratio_in_home_currency(currency: str, gain: float) -> None:
    parity = one(yearly("dividend-price", SPOT, FORWARD, rho=RHO, currency=currency), ECONOMIES)
    local = row(one(yearly("dividend-price", rho=RHO), ECONOMIES))
    found = row(parity)
    # The ratio has no currency; return and growth gain on the money, and the bill is the home one at 5 percent.
    assert found == pytest.approx(
        [local[0], math.log(1.15) + gain - 0.05, 0.05, math.log(5 / 4) + gain, local[4], local[5]], abs=1e-14
    )
    assert parity.entities[0].currency == "AAA"


@pytest.mark.parametrize(
    ("currency", "sure", "open_gain"), [("home unhedged", 0.0, RISE), ("home hedged", DISCOUNT, 0.0)]
)
def test_carry_in_home_currency(currency: str, sure: float, open_gain: float) -> None:
    """A hedge is known today and so part of the carry; without one the money moves with the price."""
    parity = one(yearly("carry", SPOT, FORWARD, currency=currency), ECONOMIES)
    assert row(parity) == pytest.approx(
        [
            math.log(1.04) + sure - 0.05,
            math.log(1.15) + sure + open_gain - 0.05,
            math.log(1.1) + open_gain,
            math.log(1 + 5 / 110) - math.log(1.04),
        ],
        abs=1e-14,
    )


def test_a_hedge_from_rates_where_no_forwards_are_quoted() -> None:
    parity = one(yearly("carry", SPOT, currency="home hedged"), ECONOMIES)
    # f - s = 5 - 3 percent: the carry over the home bill is the local one.
    assert parity.signal[0, 0] == pytest.approx(math.log(1.04) + 0.02 - 0.05, abs=1e-15)


def test_a_forward_that_stands_in_for_a_longer_hedge_is_noted() -> None:
    options = {"currency": "home hedged", "horizons": "24m", "missing_tenor": "nearest"}
    parity = one(yearly("carry", SPOT, FORWARD, **options), ECONOMIES)
    # Twice the discount of a year.
    assert parity.signal[0, 0] == pytest.approx(math.log(1.08) + 2 * DISCOUNT - 2 * 0.05, abs=1e-14)
    assert {"carry is hedged over 24m at once", "forwards of 12m stand in for 24m"} <= set(parity.notes)


def test_the_home_index_has_no_gain_on_money() -> None:
    tables = [
        table(role, "economy", {("EH",): values, ("EA",): values}, interval="year", **declared)
        for role, values, declared in (
            ("prices", [100.0, 110.0, 121.0], {}),
            ("dividends", [4.0, 5.0, 5.5], {"basis": "trailing 12 months"}),
        )
    ]
    rates = bills({("HHH", "12m"): [0.05, 0.04, 0.03]})
    options = {"interval": "year", "horizons": "12m", "currency": "home unhedged"}
    parity = one(market("equities", "carry", *tables, rates, SPOT, **options), ECONOMIES)
    excess = leg(parity, "excess return").values[0]
    assert [entity.name for entity in parity.entities] == ["EA", "EH"]
    assert excess == pytest.approx([math.log(1.15) + RISE - 0.05, math.log(1.15) - 0.05], abs=1e-15)


@pytest.mark.parametrize("currency", ["home unhedged", "home hedged"])
def test_a_hole_in_the_exchange_rate_is_no_price_in_local_currency(currency: str) -> None:
    holed = table("spot", "currency", {("AAA",): [2.0, math.nan, 2.1]}, interval="year", quote="home per foreign")
    parity = one(yearly("carry", holed, FORWARD, currency=currency), ECONOMIES)
    excess = leg(parity, "excess return").values[:, 0]
    # Unhedged the hole is in the gain of both years; hedged the forward is sold at spot, which is missing in year 1.
    assert np.isnan(excess).tolist() == ([True, True, True] if currency == "home unhedged" else [False, True, True])


def test_an_index_is_mapped_to_its_economy() -> None:
    tables = (
        table("prices", "index", {("BIG",): [100.0, 110.0]}, interval="year"),
        table("dividends", "index", {("BIG",): [4.0, 5.0]}, interval="year", basis="trailing 12 months"),
        bills({("AAA", "12m"): [0.03, 0.03]}),
    )
    data = market("equities", "carry", *tables, interval="year", horizons="12m", index_economy={"BIG": "EA"})
    (entity,) = one(data, ECONOMIES).entities
    assert (entity.name, entity.economy, entity.currency, entity.index) == ("BIG", "EA", "AAA", "BIG")


@pytest.mark.parametrize(
    ("change", "error", "line"),
    [
        (
            {"interval": "week"},
            StudyError,
            "key interval: 'week' is not allowed for equities; allowed are month, quarter",
        ),
        ({"currency": "home unhedged"}, DataError, "currency = 'home unhedged' needs spot rates; declare them as spot"),
        ({"currency": "home hedged", "home": None}, StudyError, "the key home is missing; currency = 'home hedged'"),
        (
            {"bills": {("BBB", "12m"): [0.03] * 3}},
            DataError,
            "no deposits in 'AAA', the currency of EA; found BBB; add",
        ),
        ({"bills": {("AAA", "24m"): [0.03] * 3}}, DataError, "no deposits of 12m; quoted are 24m"),
        ({"bills": {("AAA", "7m"): [0.03] * 3}}, DataError, "no deposits of 12m; quoted are 7m"),
        ({"paid": [math.nan, 0.0, 0.0]}, DataError, "on no date do a price and a dividend above zero stand together"),
    ],
)
def test_what_cannot_be_is_one_line(change, error: type[Exception], line: str) -> None:
    options = {"interval": "year", "horizons": "12m", **change}
    interval = options["interval"]
    rates = options.pop("bills", {("AAA", "12m"): [0.03] * 3})
    tables = (
        prices([100.0, 110.0, 121.0], interval),
        dividends(options.pop("paid", [4.0] * 3), interval),
        bills(rates, interval),
    )
    with pytest.raises(error) as refused:
        built(market("equities", "dividend-price", *tables, **options), ECONOMIES)
    assert line in str(refused.value)
    assert "\n" not in str(refused.value)


def test_no_spot_rate_of_an_index_s_currency() -> None:
    other = table("spot", "currency", {("BBB",): [2.0, 2.2, 2.1]}, interval="year", quote="home per foreign")
    with pytest.raises(DataError, match="no spot rate of 'AAA' against HHH; found BBB"):
        built(yearly("carry", other, currency="home unhedged"), ECONOMIES)


def test_two_bases_of_dividends_are_refused() -> None:
    data = quarterly(dividends([4.0] * 8, "quarter"), dividends([1.0] * 8, "quarter", "per period"))
    with pytest.raises(DataError, match="dividends are 'per period' here and 'trailing 12 months' in"):
        built(data, ECONOMIES)
