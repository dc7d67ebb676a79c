"""Bond parities in numbers worked by hand, the rules for maturities not quoted, and what is refused."""

import math

import numpy as np
import pytest
from markets_built import CASES, built, leg, market, one, random_market, steps_summed, table

from carrylab.data.calendar import parse_tenor
from carrylab.data.panel import Curves
from carrylab.errors import DataError, StudyError
from carrylab.markets.curves import YieldCurves

# Yearly data, log yields. Prices p = -n y, in percent:
#   year   y1   y2   y3     p1   p2    p3
#   0       2    3    4     -2   -6   -12
#   1       5    4.5  5     -5   -9   -15
#   2       6    5    7     -6  -10   -21
YIELDS = {("EA", "12m"): [0.02, 0.05, 0.06], ("EA", "24m"): [0.03, 0.045, 0.05], ("EA", "36m"): [0.04, 0.05, 0.07]}


def yearly(parity: str, **options):
    yields = table("zero_yields", "economy maturity", YIELDS, interval="year", **options.pop("declared", {}))
    return market("bonds", parity, yields, interval="year", **options)


def numbers(parity, row: int = 0, entity: int = 0) -> list[float]:
    """Signal and legs of one row in percent."""
    return [100 * float(values[row, entity]) for values in (parity.signal, *(leg.values for leg in parity.legs))]


@pytest.mark.parametrize(
    ("name", "options", "row", "expected"),
    [
        # p0(1) - p0(2) - y0(1) = -2 + 6 - 2 = 2; return p1(1) - p0(2) - 2 = -5 + 6 - 2 = -1; rate 5 - 2 = 3.
        ("forward-spot", {"horizons": "1y", "maturities": "2y"}, 0, [2, -1, 3]),
        # p0(2) - p0(3) - 2 = -6 + 12 - 2 = 4; return -9 + 12 - 2 = 1; rise 2 (4.5 - 3) = 3.
        ("forward-spot", {"horizons": "1y", "maturities": "3y"}, 0, [4, 1, 3]),
        # p1(1) - p1(2) - 5 = -5 + 9 - 5 = -1; return -6 + 9 - 5 = -2; rise 6 - 5 = 1.
        ("forward-spot", {"horizons": "1y", "maturities": "2y"}, 1, [-1, -2, 1]),
        # 1/2 (4 - 2) = 1; return 1 over two years left = .5; long yield 4.5 - 4 = .5.
        ("yield-spread", {"horizons": "1y", "maturities": "3y"}, 0, [1, 0.5, 0.5]),
        # 2/1 (4 - 3) = 2; return p2(1) - p0(3) - 2 y0(2) = -6 + 12 - 6 = 0 over one year left; 6 - 4 = 2.
        ("yield-spread", {"horizons": "2y", "maturities": "3y"}, 0, [2, 0, 2]),
        # The return 1 less the change of the price of a two-year bond, -9 + 6 = -3, is the spread 4.
        ("carry", {"horizons": "1y", "maturities": "3y"}, 0, [4, 1, -3]),
        # k = 1, held two years: p2(1) - p0(3) - 2 y0(2) = -6 + 12 - 6 = 0; 1 (6 - 2) = 4; spread as above.
        ("forward-spot-far", {"short": "1y", "maturities": "3y"}, 0, [4, 0, 4]),
        # k = 2, held one year: p0(1) - p0(3) - 2 x 3 = -2 + 12 - 6 = 4; p1(2) - p0(3) - 2 = 1; 2 (4.5 - 3) = 3.
        ("forward-spot-far", {"short": "2y", "maturities": "3y"}, 0, [4, 1, 3]),
        # 4 - 2 = 2; short rates (2 + 5 + 6)/3 - 2 = 7/3; returns: the 3y bond -9 + 12 - 2 = 1, then the 2y bond
        # -6 + 9 - 5 = -2, in the last year it is the short bond: (1 - 2)/3.
        ("yield-spread-to-maturity", {"short": "1y", "maturities": "3y"}, 0, [2, -1 / 3, 7 / 3]),
    ],
)
def test_worked_by_hand(name: str, options: dict[str, str], row: int, expected: list[float]) -> None:
    parity = one(yearly(name, **options))
    assert numbers(parity, row) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize(
    ("name", "legs"),
    [
        ("forward-spot", [("excess return", "return", 1, 0), ("rate rise", "fundamental", 1, 1)]),
        ("yield-spread", [("excess return", "return", 1, 0), ("long-rate rise", "fundamental", 1, 1)]),
        ("carry", [("excess return", "return", 1, 0), ("price change beyond the carry", "fundamental", -1, -1)]),
        ("forward-spot-far", [("excess return", "return", 1, 0), ("rate rise", "fundamental", 1, 1)]),
        (
            "yield-spread-to-maturity",
            [("average excess return", "return", 1, 0), ("average short-rate rise", "fundamental", 1, 1)],
        ),
    ],
)
def test_names_roles_weights_and_nulls(name: str, legs: list[tuple[str, str, int, int]]) -> None:
    options = {"short": "1y"} if name in ("forward-spot-far", "yield-spread-to-maturity") else {"horizons": "1y"}
    parity = built(yearly(name, maturities="2y", **options))[0]
    assert [(leg.name, leg.role, leg.weight, leg.null) for leg in parity.legs] == legs


def test_percent_and_annual_compounding_become_logs() -> None:
    quoted = {("EA", "12m"): [5.0, 4.0], ("EA", "24m"): [6.0, 5.0]}
    yields = table("zero_yields", "economy maturity", quoted, interval="year", unit="percent", compounding="annual")
    parity = one(market("bonds", "forward-spot", yields, interval="year", horizons="1y", maturities="2y"))
    # Forward rate 2 ln 1.06 - ln 1.05, spot ln 1.05; return 2 ln 1.06 - ln 1.04 - ln 1.05.
    assert parity.signal[0, 0] == pytest.approx(2 * math.log(1.06) - 2 * math.log(1.05), abs=1e-15)
    assert parity.legs[0].values[0, 0] == pytest.approx(2 * math.log(1.06) - math.log(1.04 * 1.05), abs=1e-15)
    assert parity.legs[1].values[0, 0] == pytest.approx(math.log(1.04 / 1.05), abs=1e-15)


def test_entities_are_economies_by_maturity() -> None:
    quoted = {(code, n): [0.01, 0.02] for code in ("EA", "EB") for n in ("12m", "24m", "36m")}
    yields = table("zero_yields", "economy maturity", quoted, interval="year")
    parity = one(market("bonds", "forward-spot", yields, interval="year", horizons="1y", maturities="2y 3y"))
    assert [entity.name for entity in parity.entities] == ["EA 2y", "EB 2y", "EA 3y", "EB 3y"]
    first = parity.entities[1]
    assert (first.economy, first.currency, first.maturity, first.group("maturity")) == ("EB", "BBB", "2y", "2y")


def test_without_maturities_every_quoted_one_beyond_the_horizon_is_used() -> None:
    parity = one(yearly("forward-spot", horizons="1y"))
    assert [entity.maturity for entity in parity.entities] == ["24m", "36m"]
    distant = built(yearly("forward-spot-far", short="1y"))
    assert [(str(one.horizon), one.entities[0].maturity) for one in distant] == [("12m", "24m"), ("24m", "36m")]


def test_a_hole_is_a_hole_of_what_it_enters_only() -> None:
    holed = {key: list(values) for key, values in YIELDS.items()}
    holed["EA", "24m"][1] = math.nan
    yields = table("zero_yields", "economy maturity", holed, interval="year")
    parity = one(market("bonds", "forward-spot", yields, interval="year", horizons="1y", maturities="2y 3y"))
    # The two-year yield of year 1: signal of both bonds in year 1; the later rate of the three-year bond of year 0.
    np.testing.assert_array_equal(np.isnan(parity.signal), [[False, False], [True, True], [False, False]])
    np.testing.assert_array_equal(
        np.isnan(leg(parity, "rate rise").values), [[False, True], [False, True], [True, True]]
    )


THREE = {("EA", "12m"): [0.02, 0.02], ("EA", "36m"): [0.04, 0.04], ("EA", "48m"): [0.03, math.nan]}


@pytest.mark.parametrize(
    ("rule", "two_years"),
    [
        # Halfway between 2 and 4 percent.
        ("linear in yield", [0.03, 0.03]),
        # Log price halfway between -2 and -12: -7 over two years.
        ("flat forward", [0.035, 0.035]),
        # Natural spline through (1, 2), (3, 4), (4, 3): second derivative at 3 is 6 (-1 - 1) / (2 (2 + 1)) = -2, so
        # at 2 the straight 3 plus (1/8 - 1/2) (-2) 2^2 / 6 = .5. In the second year two points are too few.
        ("cubic in yield", [0.035, math.nan]),
    ],
)
def test_a_maturity_between_the_quoted_ones(rule: str, two_years: list[float]) -> None:
    yields = table("zero_yields", "economy maturity", THREE, interval="year")
    data = market(
        "bonds", "yield-spread", yields, interval="year", horizons="1y", maturities="2y", missing_maturity=rule
    )
    parity = one(data)
    # 1/(2 - 1) (y(2) - y(1)).
    np.testing.assert_allclose(parity.signal[:, 0] + 0.02, two_years, atol=1e-15)
    assert parity.notes == (f"maturities not quoted (24m) are filled: {rule}",)


@pytest.mark.parametrize(
    ("rule", "two_years"),
    [
        # A third of the way from 2 to 5 percent.
        ("linear in yield", 0.03),
        # Log price a third of the way from -2 to -20: -8 over two years.
        ("flat forward", 0.04),
    ],
)
def test_a_maturity_nearer_to_the_shorter_of_two(rule: str, two_years: float) -> None:
    quoted = {("EA", "12m"): [0.02, 0.02], ("EA", "48m"): [0.05, 0.05]}
    yields = table("zero_yields", "economy maturity", quoted, interval="year")
    options = {"interval": "year", "horizons": "1y", "maturities": "2y", "missing_maturity": rule}
    parity = one(market("bonds", "yield-spread", yields, **options))
    assert parity.signal[0, 0] + 0.02 == pytest.approx(two_years, abs=1e-15)


def test_notes_name_only_what_their_own_parity_filled() -> None:
    yields = table("zero_yields", "economy maturity", THREE, interval="year")
    options = {"interval": "year", "missing_maturity": "linear in yield"}
    filled, quoted = built(market("bonds", "forward-spot", yields, horizons="2y 1y", maturities="48m", **options))
    assert filled.notes == ("maturities not quoted (24m) are filled: linear in yield",)
    assert quoted.notes == ()


def test_monthly_returns_add_up_to_the_leg() -> None:
    case = CASES[0]
    parity = one(random_market(case, 8))
    excess, rise = parity.legs
    assert excess.one_step.shape == (*parity.signal.shape, 3)
    there = np.isfinite(excess.values)
    np.testing.assert_allclose(steps_summed(parity, excess)[there], excess.values[there], atol=1e-15)
    np.testing.assert_array_equal(rise.one_step, -excess.one_step)


def test_a_month_of_a_bond_held_two() -> None:
    months = {("EA", f"{n}m"): [0.01 * n, 0.012 * n, 0.011 * n] for n in (1, 2, 3, 4)}
    yields = table("zero_yields", "economy maturity", months)
    (parity,) = built(market("bonds", "forward-spot", yields, horizons="2m", maturities="4m"))
    # In percent, 12 p(n) = -n y(n). First month, the 4m against the 2m bond: [-3 (3.6) + 1.2] - [-4 (4) + 2 (2)] = 2.4.
    # Second month: -2 (2.2) - [-3 (3.6) + 1.2] = 5.2; together 7.6 over twelve.
    np.testing.assert_allclose(12 * parity.legs[0].one_step[0, 0], [0.024, 0.052], atol=1e-15)
    assert 12 * parity.legs[0].values[0, 0] == pytest.approx(0.076, abs=1e-15)


QUARTER = {("EA", f"{n}m"): [0.01 * n, 0.012 * n, 0.011 * n, 0.014 * n] for n in (1, 2, 3)}


def test_the_months_of_a_return_held_until_the_forward_rate_stands() -> None:
    yields = table("zero_yields", "economy maturity", QUARTER)
    parity = one(market("bonds", "forward-spot-far", yields, short="1m", maturities="3m"))
    # In percent, 12 p(n) = -n y(n). The 3m over the 2m bond: [-2 (2.4) + 1.2] - [-3 (3) + 2 (2)] = 1.4, then the 2m
    # over the 1m bond, which is paid back: -1.1 - [-2 (2.4) + 1.2] = 2.5.
    np.testing.assert_allclose(12 * parity.legs[0].one_step[0, 0], [0.014, 0.025], atol=1e-15)
    assert 12 * parity.legs[0].values[0, 0] == pytest.approx(0.039, abs=1e-15)
    np.testing.assert_array_equal(parity.legs[1].one_step, -parity.legs[0].one_step)


def test_the_months_of_a_return_over_rolling_bonds() -> None:
    yields = table("zero_yields", "economy maturity", QUARTER)
    parity = one(market("bonds", "yield-spread-to-maturity", yields, short="1m", maturities="3m"))
    # The 3m over a 1m bond: -2 (2.4) - [-3 (3) + 1] = 3.2; then the 2m over the next 1m bond: -1.1 - [-2 (2.4) + 1.2]
    # = 2.5, as twelfths of a percent; over the three months of its life.
    np.testing.assert_allclose(3 * parity.legs[0].one_step[0, 0], [0.032, 0.025], atol=1e-15)
    assert 3 * parity.legs[0].values[0, 0] == pytest.approx(0.057, abs=1e-15)


MONTHS = tuple(range(1, 25))


@pytest.mark.parametrize(
    ("months", "declared", "note"),
    [
        (
            (1, *range(12, 25)),
            {},
            "yields of every month of a bond's life are not quoted (2m is missing): no one-period errors",
        ),
        (MONTHS, {"timing": "average"}, "yields are period averages, so there are no one-period errors"),
        (MONTHS, {"interval": "week"}, "returns over 12m are not made of weeks, so there are no one-period errors"),
        (MONTHS, {"interval": "day"}, "returns over 12m are not made of days, so there are no one-period errors"),
    ],
)
def test_where_one_period_returns_are_unknown_there_are_none(months, declared, note) -> None:
    interval = declared.get("interval", "month")
    yields = table("zero_yields", "economy maturity", {("EA", f"{n}m"): [0.01] * 30 for n in months}, **declared)
    data = market("bonds", "forward-spot", yields, interval=interval, horizons="12m", maturities="24m")
    parity = one(data)
    assert [leg.one_step for leg in parity.legs] == [None, None]
    assert parity.notes == (note,)


def uneven():
    """EA quotes every year to the fourth, EB not the second."""
    quoted = {("EA", f"{12 * n}m"): [0.01 * n] * 3 for n in (1, 2, 3, 4)}
    quoted |= {("EB", f"{12 * n}m"): [0.02 * n] * 3 for n in (1, 3, 4)}
    return table("zero_yields", "economy maturity", quoted, interval="year")


def test_every_economy_is_filled_between_its_own_maturities() -> None:
    options = {"interval": "year", "horizons": "1y", "missing_maturity": "linear in yield"}
    parity = one(market("bonds", "yield-spread", uneven(), maturities="2y", **options))
    # Halfway between 2 and 6 percent, less 2.
    np.testing.assert_allclose(parity.signal[0], [0.01, 0.02], atol=1e-15)
    assert parity.notes[0] == "maturities not quoted (24m of EB) are filled: linear in yield"


def test_a_spline_needs_three_maturities() -> None:
    two = {("EA", "12m"): [0.02, 0.02], ("EA", "36m"): [0.04, 0.04]}
    yields = table("zero_yields", "economy maturity", two, interval="year")
    options = {"interval": "year", "horizons": "1y", "maturities": "2y"}
    with pytest.raises(DataError, match="no yield of maturity 2y for EA, which quotes 12m, 36m"):
        built(market("bonds", "yield-spread", yields, missing_maturity="cubic in yield", **options))


def test_an_economy_without_any_yield_lacks_none() -> None:
    tenors = (parse_tenor("12m"), parse_tenor("24m"))
    quoted = Curves(("EA", "EC"), tenors, np.array([[[0.01, 0.02], [math.nan, math.nan]]]))
    curves = YieldCurves(quoted, market("bonds", "forward-spot", uneven()).market)
    np.testing.assert_array_equal(curves.yields(tenors[1]), [[0.02, math.nan]])
    assert curves.lacks(tenors[1]) == []
    assert curves.lacks(parse_tenor("36m")) == ["EA"]


def test_an_economy_without_a_maturity_is_named_with_what_it_quotes() -> None:
    with pytest.raises(DataError) as refused:
        built(market("bonds", "forward-spot", uneven(), interval="year", horizons="1y", maturities="3y 4y"))
    assert str(refused.value) == (
        "market 'M': no yield of maturity 24m for EB, which quotes 12m, 36m, 48m; missing_maturity is 'exact'; quote "
        "it, choose other maturities or horizons, add 'EB 3y' to leave_out, or set missing_maturity to \"linear in "
        'yield", "flat forward" or "cubic in yield" (of three or more), which fill between the quoted ones only'
    )


@pytest.mark.parametrize("out", ["EB 3y", "EB", "BBB"])
def test_a_bond_left_out_needs_no_maturity(out: str) -> None:
    data = market(
        "bonds", "forward-spot", uneven(), interval="year", horizons="1y", maturities="3y 4y", leave_out=(out,)
    )
    parity = one(data)
    assert [entity.name for entity in parity.entities] == ["EA 3y", "EB 3y", "EA 4y", "EB 4y"]
    # The bond of four years needs three and one only, so it stands and has its returns year by year.
    np.testing.assert_array_equal(np.isnan(parity.signal[0]), [False, True, False, False])
    assert parity.legs[0].one_step.shape == (3, 4, 1)
    assert parity.notes == ()


WEEKS = {("EA", f"{n}m"): [0.01, 0.02, 0.03] for n in (1, 12)}


@pytest.mark.parametrize(
    ("name", "options", "error", "line"),
    [
        (
            "forward-spot",
            {"horizons": "2y", "maturities": "3y 2y"},
            StudyError,
            "market 'M', key maturities: '2y' is not longer than 2y; allowed are longer maturities, as the bond must "
            "live on when the holding period ends",
        ),
        (
            "forward-spot",
            {"horizons": "3y"},
            StudyError,
            "market 'M', key maturities: of 12m, 24m, 36m none is not longer",
        ),
        (
            "forward-spot",
            {"horizons": "1y", "maturities": "5y"},
            DataError,
            "market 'M': no yield of maturity 48m for EA, which quotes 12m, 24m, 36m; missing_maturity is 'exact'; "
            "quote it, choose other maturities or horizons, or set missing_maturity to",
        ),
        (
            "forward-spot",
            {"horizons": "1y", "maturities": "5y", "missing_maturity": "flat forward"},
            DataError,
            "missing_maturity is 'flat forward'; quote it, choose other maturities or horizons, or set "
            'missing_maturity to "linear in yield", "flat forward" or "cubic in yield" (of three or more), which '
            "fill between the quoted ones only",
        ),
        (
            "yield-spread-to-maturity",
            {"short": "2y", "maturities": "3y"},
            StudyError,
            "market 'M', key maturities: '3y' is no whole number of 2y; allowed with yield-spread-to-maturity are "
            "multiples of short",
        ),
        (
            "forward-spot-far",
            {"short": "18m", "maturities": "3y"},
            StudyError,
            "market 'M', key maturities: '3y' with short = 18m: 18m is no whole number of years, as "
            "forward-spot-far needs",
        ),
        (
            "forward-spot-far",
            {"maturities": "3y"},
            StudyError,
            "market 'M': the key short is missing; forward-spot-far",
        ),
    ],
)
def test_what_cannot_be_is_one_line(name: str, options: dict[str, str], error: type[Exception], line: str) -> None:
    with pytest.raises(error) as refused:
        built(yearly(name, **options))
    assert line in str(refused.value)
    assert "\n" not in str(refused.value)


def test_trading_days_are_no_life_of_a_bond() -> None:
    yields = table("zero_yields", "economy maturity", WEEKS, interval="day")
    with pytest.raises(StudyError, match="key horizons: '21d' counts trading days, in which no maturity is quoted"):
        built(market("bonds", "forward-spot", yields, interval="day", horizons="21d", maturities="12m"))


def test_a_month_on_a_week_calendar() -> None:
    T = 12
    quoted = {("EA", f"{n}m"): 0.01 * n + 0.001 * np.arange(T) for n in (1, 11, 12)}
    yields = table("zero_yields", "economy maturity", quoted, interval="week")
    parity = one(market("bonds", "forward-spot", yields, interval="week", horizons="1m", maturities="12m"))
    assert parity.window.ends[0] == 4  # Sunday 6 February 2000 plus a month is Monday 6 March; Sunday 5 March is read
    assert parity.horizon == parse_tenor("1m")
    change = 11 / 12 * (quoted["EA", "11m"][4] - quoted["EA", "11m"][0])
    assert leg(parity, "rate rise").values[0, 0] == pytest.approx(change, abs=1e-15)
