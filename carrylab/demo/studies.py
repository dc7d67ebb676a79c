"""The studies of the clean demo set, as they stand in `datasets_demo/clean`."""

HEAD = """\
home     = "QMT"
interval = "month"
from     = "1996-01"
until    = "2025-12"
horizons = ["12m"]

[economies]
QM = "QMT"
QN = "QNK"
QP = "QPD"
QQ = "QQS"
QR = "QRL"
QS = "QSG"
QT = "QTN"
QV = "QVP"
QW = "QWE"
QX = "QXM"
QY = "QYR"
"""

DAY_COUNT = '{ QPD = "act/365f", QVP = "act/365f", QYR = "act/365f", others = "act/360" }'
DEPOSITS = f"""\
[market.data.deposits]
file = "deposit_rates.csv"
spread = "tenor"
unit = "percent"
compounding = "simple"
day_count = {DAY_COUNT}
"""
FORWARDS = """\
[market.data.forwards]
file = "fx_forwards.csv"
quote = "points"
scale = { QNK = 100, others = 10000 } # points in one unit of the price
"""

CLEAN = f"""\
# The demo study: an invented world of eleven economies. All data here are made up.
title    = "Is the spread paid or passed on?"
{HEAD}
[[market]]
name = "Sovereign bonds"
kind = "bonds"
parities = ["forward-spot", "yield-spread", "carry"]
maturities = ["2y", "3y", "5y", "10y"]
by = "maturity"
effects = "entity"                    # so slopes speak of changes in a spread, not of its standing level
leave_out = ["QS"]                    # its curve is the home curve plus the price of a break of the peg
[market.data.zero_yields]
file = "zero_yields.csv"
spread = "maturity"
unit = "percent"
compounding = "annual"
timing = "end"

[[market]]
name = "Currencies"
kind = "currencies"
parities = ["uncovered-interest", "forward-discount", "carry"]
horizons = ["1m", "3m", "12m"]
by = "currency"
effects = "entity"
pegs = ["QSG"]                        # pegged to QMT until 2013-09, when the peg breaks
[market.data]
spot = [ {{ file = "fx_spot.csv", quote = "pair" }}, {{ file = "fx_crosses.csv", quote = "pair" }} ]
{FORWARDS}{DEPOSITS}
[[market]]
name = "Equity indices"
kind = "equities"
parities = ["dividend-price", "carry"]
horizons = ["12m", "60m"]
by = "economy"
effects = "entity"
missing_tenor = "nearest"             # carry over five years takes the twelve-month bill
[market.data]
prices = {{ file = "equity_price.csv", spread = "economy" }}
dividends = {{ file = "equity_dividend.csv", spread = "economy", basis = "trailing 12 months" }}
total_return = {{ file = "equity_total_return.csv", spread = "economy" }}
{DEPOSITS}"""

CONTROLLED = f"""\
# The same currencies with one more predictor, which is published two months late.
title    = "Is the differential paid once growth is known?"
{HEAD}
[[market]]
name = "Currencies"
kind = "currencies"
parities = ["uncovered-interest"]
horizons = ["1m"]
by = "currency"
effects = "entity"                    # so slopes speak of changes in a spread, not of its standing level
leave_out = ["QSG"]
controls = [ {{ name = "growth", file = "growth.csv", spread = "economy", known_after = "2m" }} ]
[market.data]
spot = {{ file = "fx_spot.csv", quote = "pair" }}
{DEPOSITS}"""
