"""The invented economies and the numbers that set them apart. Codes are user-assigned ones of ISO 3166."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal


@dataclass(frozen=True, slots=True)
class Economy:
    """One invented economy.

    `short`: mean one-month rate, per year, decimal. `scale`: size of its rate shocks against the model economy.
    `spot`: home price of its currency when the sample starts. `base`: who stands first in the quoted pair.
    `half_spread`: half the spread of a spot quote, log. `payout`: mean dividend yield. `peak`: weight of the
    dividend season, April to October, in a year's dividends. `since`, `until`: first and last month in the data.
    """

    code: str
    name: str
    currency: str
    role: str
    short: float
    scale: float
    spot: float
    half_spread: float
    payout: float
    base: Literal["foreign", "home"] = "foreign"
    day_count: Literal["act/360", "act/365f"] = "act/360"
    peak: float = 7 / 12
    since: str = "1996-01"
    until: str = "2025-12"


ECONOMIES: tuple[Economy, ...] = (
    Economy("QM", "Morvane", "QMT", "home: the widest market", 0.030, 0.75, 1.0, 0.0, 0.022),
    Economy("QN", "Nessarin", "QNK", "low rates, often negative", 0.001, 0.36, 1 / 112, 0.0001, 0.018, base="home"),
    Economy(
        "QP", "Pellorin", "QPD", "high rates; falls when a recession starts", 0.054, 0.90, 0.71, 0.0002, 0.041,
        day_count="act/365f",
    ),
    Economy("QQ", "Quennoria", "QQS", "ordinary; home currency stands first", 0.027, 0.75, 0.74, 0.0001, 0.030, "home"),
    Economy("QR", "Rovanth", "QRL", "high inflation", 0.112, 1.60, 0.36, 0.0006, 0.046),
    Economy("QS", "Sundrel", "QSG", "pegged to QMT until 2013-09", 0.045, 0.75, 0.25, 0.0003, 0.035, base="home"),
    Economy("QT", "Tarvoss", "QTN", "bond market closed for 14 months", 0.038, 0.80, 0.129, 0.0002, 0.032),
    Economy(
        "QV", "Vostrelle", "QVP", "enters in 2004", 0.062, 1.00, 0.047, 0.0004, 0.028,
        day_count="act/365f", since="2004-01",
    ),
    Economy("QW", "Wendrath", "QWE", "leaves in 2011", 0.041, 0.80, 1.19, 0.0002, 0.038, until="2011-06"),
    Economy("QX", "Xanthel", "QXM", "low volatility", 0.022, 0.60, 0.61, 0.0001, 0.026),
    Economy(
        "QY", "Yssandor", "QYR", "dividends from April to October only", 0.034, 0.75, 1.55, 0.0001, 0.034,
        day_count="act/365f", peak=1.0,
    ),
)  # fmt: skip
CODES: tuple[str, ...] = tuple(economy.code for economy in ECONOMIES)
HOME, PEGGED, CLOSED = CODES.index("QM"), CODES.index("QS"), CODES.index("QT")
FLOATING: tuple[int, ...] = tuple(i for i in range(len(CODES)) if i not in (HOME, PEGGED))

PEG_BREAKS = "2013-10"
CLOSED_MONTHS = ("2008-10", "2009-11")  # first and last month without a bond market in QT
