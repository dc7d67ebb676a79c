"""Exchange rates of every direction, forwards and points among them, as log home prices of foreign currency."""

import math
from dataclasses import replace

import numpy as np
import pytest
from declared import Put

from carrylab.data.calendar import Calendar, make_calendar, parse_tenor
from carrylab.data.quotes import forward_quotes, split_pair, spot_quotes
from carrylab.data.read import Table, read_source
from carrylab.errors import DataError
from carrylab.options import Source

JANUARY = 2024 * 12
OTHERS = {"others": 10000.0}


def months(count: int) -> Calendar:
    return make_calendar("month", np.arange(count) + JANUARY)


def read(source: Source, **declared: object) -> Table:
    return read_source(replace(source, **declared), interval="month", first=None, last=None)


def spot(put: Put, text: str, quote: str, name: str = "spot.csv") -> Table:
    return read(put(text, name, role="spot"), quote=quote)


def forwards(put: Put, text: str, quote: str, **declared: object) -> Table:
    tenor = parse_tenor("1m")
    return read(put(text, "forwards.csv", role="forwards"), quote=quote, tenor=tenor, **declared)


def home(table: Table, count: int = 2) -> np.ndarray:
    return spot_quotes([table], months(count), "QMT").home.values[:, 0]


EVERY_DIRECTION = [
    ("currency", "QNK", "home per foreign", 1.25),
    ("currency", "QNK", "foreign per home", 0.8),
    ("pair", "QNKQMT", "pair", 1.25),
    ("pair", "QNK/QMT", "pair", 1.25),
    ("pair", "QMTQNK", "pair", 0.8),
]


@pytest.mark.parametrize(("key", "code", "quote", "value"), EVERY_DIRECTION)
def test_every_direction_gives_the_log_home_price_of_the_foreign_currency(
    put: Put, key: str, code: str, quote: str, value: float
) -> None:
    quotes = spot_quotes([spot(put, f"date,{key},value\n2024-01,{code},{value}\n", quote)], months(1), "QMT")
    assert quotes.home.codes == ("QNK",)
    assert quotes.home.values[0, 0] == pytest.approx(math.log(1.25), abs=1e-15)
    assert quotes.crosses.codes == ()


def test_two_way_quotes_of_both_directions_are_the_same(put: Put) -> None:
    """The middle is taken in logs, and turned round bid and ask are 1/ask and 1/bid."""
    straight = home(spot(put, "date,pair,bid,ask\n2024-01,QNKQMT,1.24,1.26\n2024-02,QNKQMT,1.3,1.31\n", "pair"))
    rows = f"2024-01,QMTQNK,{1 / 1.26!r},{1 / 1.24!r}\n2024-02,QMTQNK,{1 / 1.31!r},{1 / 1.3!r}\n"
    turned = home(spot(put, "date,pair,bid,ask\n" + rows, "pair"))
    np.testing.assert_allclose(straight, turned, atol=1e-15)
    assert straight[0] == pytest.approx((math.log(1.24) + math.log(1.26)) / 2, abs=1e-15)


def test_crosses_stand_apart_and_home_in_itself_is_left_out(put: Put) -> None:
    pairs = spot(put, "date,pair,value\n2024-01,QNKQMT,1.25\n2024-01,QPDQNK,2\n", "pair")
    quotes = spot_quotes([pairs], months(1), "QMT")
    assert (quotes.home.codes, quotes.crosses.codes) == (("QNK",), ("QPDQNK",))
    assert quotes.crosses.values[0, 0] == math.log(2)
    own = spot(put, "date,currency,value\n2024-01,QMT,1\n2024-01,QNK,1.25\n", "home per foreign")
    assert spot_quotes([own], months(1), "QMT").home.codes == ("QNK",)


def test_one_currency_in_two_directions_must_agree(put: Put) -> None:
    agreed = spot(put, "date,pair,value\n2024-01,QNKQMT,1.25\n2024-02,QMTQNK,0.5\n2024-01,QMTQNK,0.8\n", "pair")
    np.testing.assert_allclose(home(agreed), [math.log(1.25), math.log(2)])
    with pytest.raises(DataError, match="QNK is quoted twice with different values; keep one source"):
        home(spot(put, "date,pair,value\n2024-01,QNKQMT,1.25\n2024-01,QMTQNK,0.81\n", "pair"))


@pytest.mark.parametrize("pair", ["QNK", "QNKQMTX", "QN/QMT", "QNK/QMT/QPD"])
def test_what_is_no_pair(put: Put, pair: str) -> None:
    source = put("date,pair,value\n2024-01,QNKQMT,1\n", "spot.csv", role="spot")
    with pytest.raises(DataError) as refused:
        split_pair(source, pair)
    assert str(refused.value) == (f"spot.csv: pair {pair!r} is not allowed; allowed are BBBQQQ and BBB/QQQ, base first")


def test_no_quote_against_home(put: Put) -> None:
    with pytest.raises(DataError, match="no pair with the home currency 'QMT'; check home and the pairs"):
        home(spot(put, "date,pair,value\n2024-01,QPDQNK,2\n", "pair"))


SPOTS = {
    "straight": ("date,pair,value\n2024-01,QNKQMT,1.25\n", "pair"),
    "turned": ("date,pair,value\n2024-01,QMTQNK,0.8\n", "pair"),
    "by currency": ("date,currency,value\n2024-01,QNK,1.25\n", "home per foreign"),
}


@pytest.mark.parametrize(
    ("on", "text", "quote", "outright"),
    [
        # 1.25 - 50/10000 = 1.245 home for a foreign unit.
        ("straight", "date,pair,value\n2024-01,QNKQMT,-50\n", "points", 1.245),
        ("straight", "date,pair,value\n2024-01,QNK/QMT,-50\n", "points", 1.245),
        ("straight", "date,currency,value\n2024-01,QNK,-50\n", "points", 1.245),
        ("by currency", "date,currency,value\n2024-01,QNK,-50\n", "points", 1.245),
        ("by currency", "date,pair,value\n2024-01,QNKQMT,-50\n", "points", 1.245),
        # On the turned quote points are foreign units: .8 + 32/10000 for a home unit.
        ("turned", "date,pair,value\n2024-01,QMTQNK,32\n", "points", 1 / 0.8032),
        ("turned", "date,currency,value\n2024-01,QNK,32\n", "points", 1 / 0.8032),
        # Bid above ask: the base currency stands at a discount. The middle is -50.
        ("straight", "date,pair,bid,ask\n2024-01,QNKQMT,-51,-49\n", "points", 1.245),
        ("straight", "date,pair,value\n2024-01,QNKQMT,1.245\n", "pair", 1.245),
        ("straight", "date,pair,value\n2024-01,QMTQNK,0.8032\n", "pair", 1 / 0.8032),
        ("straight", "date,currency,value\n2024-01,QNK,1.245\n", "home per foreign", 1.245),
        ("straight", "date,currency,value\n2024-01,QNK,0.8032\n", "foreign per home", 1 / 0.8032),
    ],
)
def test_every_forward_quote_is_a_log_home_price(put: Put, on: str, text: str, quote: str, outright: float) -> None:
    declared = {"scale": OTHERS} if quote == "points" else {}
    tables = [forwards(put, text, quote, **declared)]
    found = forward_quotes(tables, [spot(put, *SPOTS[on])], months(1), "QMT")
    assert (found.codes, [str(tenor) for tenor in found.tenors]) == (("QNK",), ["1m"])
    assert found.values[0, 0, 0] == pytest.approx(math.log(outright), abs=1e-15)


@pytest.mark.parametrize("scale", [{"QNK": 100.0, "others": 1.0}, {"QNKQMT": 100.0, "others": 1.0}])
def test_the_scale_is_named_by_currency_or_pair(put: Put, scale: dict[str, float]) -> None:
    tables = [forwards(put, "date,pair,value\n2024-01,QNKQMT,-0.5\n", "points", scale=scale)]
    found = forward_quotes(tables, [spot(put, *SPOTS["straight"])], months(1), "QMT")
    assert found.values[0, 0, 0] == pytest.approx(math.log(1.245), abs=1e-15)


def test_points_stand_on_every_file_that_quotes_their_pair(put: Put) -> None:
    old = spot(put, "date,pair,value\n2024-01,QNKQMT,1.25\n", "pair", "old.csv")
    new = spot(put, "date,pair,value\n2024-02,QNKQMT,1.26\n", "pair", "new.csv")
    points = forwards(put, "date,currency,value\n2024-01,QNK,-50\n2024-02,QNK,-50\n", "points", scale=OTHERS)
    found = forward_quotes([points], [old, new], months(2), "QMT")
    np.testing.assert_allclose(found.values[:, 0, 0], np.log([1.245, 1.255]), atol=1e-15)


def test_the_quote_says_which_key_names_the_series(put: Put) -> None:
    table = forwards(put, "date,pair,value\n2024-01,QNKQMT,1.245\n", "home per foreign")
    with pytest.raises(DataError, match="no column 'currency' for forwards"):
        forward_quotes([table], [spot(put, *SPOTS["straight"])], months(1), "QMT")


def test_forwards_of_crosses_serve_no_parity(put: Put) -> None:
    text = "date,pair,value\n2024-01,QPDQNK,2\n2024-01,QNKQMT,1.245\n"
    found = forward_quotes([forwards(put, text, "pair")], [spot(put, *SPOTS["straight"])], months(1), "QMT")
    assert found.codes == ("QNK",)


@pytest.mark.parametrize(
    ("text", "line"),
    [
        (
            "date,pair,value\n2024-01,QMTQNK,32\n",
            "forwards.csv: points for 'QMTQNK' have no spot rate to stand on; give its spot in the same direction",
        ),
        (
            "date,pair,value\n2024-01,QNKQMT,-12500\n",
            "forwards.csv: QNKQMT: points of -12500 with scale 10000.0 leave no forward price above zero; check "
            "scale and the direction of the points",
        ),
    ],
)
def test_points_that_cannot_be(put: Put, text: str, line: str) -> None:
    tables = [forwards(put, text, "points", scale=OTHERS)]
    with pytest.raises(DataError) as refused:
        forward_quotes(tables, [spot(put, *SPOTS["straight"])], months(1), "QMT")
    assert str(refused.value) == line
