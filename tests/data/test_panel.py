"""Tables as dense arrays in log units: levels, and rates of every unit."""

import math
from dataclasses import replace

import numpy as np
import pytest
from declared import Put

from carrylab.data.calendar import Calendar, make_calendar, parse_tenor
from carrylab.data.panel import by_code, curves, levels
from carrylab.data.read import Table, read_source
from carrylab.errors import DataError
from carrylab.options import Source

JANUARY = 2024 * 12


def months(count: int) -> Calendar:
    return make_calendar("month", np.arange(count) + JANUARY)


def read(source: Source, **declared: object) -> Table:
    return read_source(replace(source, **declared), interval="month", first=None, last=None)


def test_levels_stand_in_the_row_of_their_period_and_the_column_of_their_code(put: Put) -> None:
    table = read(put("date,economy,value\n2024-03,QN,3\n2024-01,QN,1\n2024-01,QM,2\n", role="prices"))
    panel = levels([table], months(3), "economy")
    assert panel.codes == ("QM", "QN")
    np.testing.assert_array_equal(panel.values, [[2, 1], [math.nan, math.nan], [math.nan, 3]])
    np.testing.assert_array_equal(panel.column("QN"), [1, math.nan, 3])
    assert np.isnan(panel.column("QX")).all()
    np.testing.assert_array_equal(panel.pick(["QN", "QX", "QM"])[0], [1, math.nan, 2])


def test_several_files_serve_one_series(put: Put) -> None:
    old = read(put("date,economy,value\n2024-01,QM,1\n2024-02,QM,2\n", "old.csv", role="prices"))
    new = read(put("date,economy,value\n2024-02,QM,2\n2024-03,QM,3\n", "new.csv", role="prices"))
    np.testing.assert_array_equal(levels([old, new], months(3), "economy").values[:, 0], [1, 2, 3])


def test_two_files_that_differ_are_refused(put: Put) -> None:
    old = read(put("date,economy,value\n2024-01,QM,1\n", "old.csv", role="prices"))
    new = read(put("date,economy,value\n2024-01,QM,1.5\n", "new.csv", role="prices"))
    with pytest.raises(DataError) as refused:
        levels([old, new], months(1), "economy")
    assert str(refused.value) == (
        "new.csv: row 2: QM is 1.5, but 1 in another file of prices; allowed is one value a series and period; keep "
        "one of the files"
    )


def test_a_key_that_a_role_needs(put: Put) -> None:
    table = read(put("date,economy,value\n2024-01,QM,1\n", role="deposits"))
    with pytest.raises(DataError) as refused:
        curves([table], months(1), "economy", "tenor")
    assert str(refused.value) == (
        "data.csv: no column 'tenor' for deposits; add it, or give it for the whole file with tenor = \"...\""
    )


def test_curves_are_log_rates_with_lengths_ascending(put: Put) -> None:
    table = read(
        put("date,economy,maturity,value\n2024-01,QM,5y,5\n2024-01,QM,12m,5\n2024-01,QM,26w,5\n"),
        unit="percent",
        compounding="annual",
    )
    found = curves([table], months(1), "economy", "maturity")
    assert [str(tenor) for tenor in found.tenors] == ["182d", "12m", "60m"]
    np.testing.assert_allclose(found.years, [182 / 365, 1, 5])
    # 5% a year is 4.8790% in logs.
    np.testing.assert_allclose(found.values[0, 0], 0.048790, atol=5e-7)
    assert found.at(parse_tenor("1y")).values.shape == (1, 1)
    assert found.at(parse_tenor("2y")) is None


def test_a_simple_rate_accrues_by_the_day_count_of_its_currency_from_its_own_day(put: Put) -> None:
    text = "date,currency,value\n2024-01-31,QMT,5\n2024-01-31,QPD,5\n2024-02-29,QMT,5\n2024-02-29,QPD,5\n"
    table = read(
        put(text, role="deposits"),
        unit="percent",
        compounding="simple",
        tenor=parse_tenor("3m"),
        day_count={"QPD": "act/365f", "others": "act/360"},
    )
    found = curves([table], months(2), "currency", "tenor").values[:, :, 0]
    # 31 January to 30 April and 29 February to 31 May (end of month stays end of month): 90 and 92 days.
    days = np.array([90, 92])
    np.testing.assert_allclose(found[:, 0], 4 * np.log1p(0.05 * days / 360), rtol=1e-14)
    np.testing.assert_allclose(found[:, 1], 4 * np.log1p(0.05 * days / 365), rtol=1e-14)


@pytest.mark.parametrize(("unit", "price"), [("decimal", "0.95"), ("percent", "95"), ("basis points", "9500")])
def test_a_discount_factor_is_in_the_unit_declared(put: Put, unit: str, price: str) -> None:
    table = read(put(f"date,economy,maturity,value\n2024-01,QM,2y,{price}\n"), unit=unit, compounding="discount factor")
    found = curves([table], months(1), "economy", "maturity").values
    assert found[0, 0, 0] == pytest.approx(-math.log(0.95) / 2, abs=1e-15)


@pytest.mark.parametrize(
    ("compounding", "value", "what"),
    [("annual", "-100", "the annual rate -100 percent"), ("discount factor", "0", "the discount factor 0 percent")],
)
def test_a_rate_without_a_growth_factor_above_zero_is_refused(
    put: Put, compounding: str, value: str, what: str
) -> None:
    table = read(
        put(f"date,economy,maturity,value\n2024-01,QM,2y,1\n2024-02,QM,2y,{value}\n"),
        unit="percent",
        compounding=compounding,
    )
    with pytest.raises(DataError) as refused:
        curves([table], months(2), "economy", "maturity")
    line = f"data.csv: row 3: {what} leaves no growth factor above zero; check unit and compounding"
    assert str(refused.value) == line


def test_a_code_without_its_declared_value(put: Put) -> None:
    source = put("date,currency,value\n2024-01,QMT,1\n", role="deposits")
    assert by_code({"QMT": 1, "others": 2}, ["QNK", "QMT"], source, "scale") == [2, 1]
    with pytest.raises(DataError) as refused:
        by_code({"QMT": 1}, ["QNK"], source, "scale")
    assert str(refused.value) == "data.csv: scale has no value for 'QNK'; it names QMT; add QNK or others"
