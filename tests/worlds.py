"""Small random worlds on disk, for tests that go from files to findings."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd

MONTHS = pd.period_range("2000-01", periods=120, freq="M")
DATES = [str(month.end_time.date()) for month in MONTHS]

CURRENCIES = """
home = "AAA"
interval = "month"
horizons = ["3m"]
[[market]]
name = "FX"
kind = "currencies"
parities = ["uncovered-interest"]
by = "currency"
[market.data]
spot = { file = "spot.csv", quote = "home per foreign" }
deposits = { file = "deposits.csv", unit = "percent", compounding = "continuous", tenor = "3m" }
"""

BONDS = """
interval = "month"
horizons = ["12m"]
[[market]]
name = "Bonds"
kind = "bonds"
parities = ["forward-spot", "yield-spread", "carry"]
maturities = ["2y", "3y"]
by = "maturity"
[market.data]
zero_yields = { file = "yields.csv", unit = "percent", compounding = "annual" }
"""

EQUITIES = """
interval = "month"
horizons = ["12m"]
[[market]]
name = "Equity"
kind = "equities"
parities = ["dividend-price", "carry"]
tolerance = 1
[market.data]
prices = { file = "prices.csv", economy = "EA" }
dividends = { file = "dividends.csv", economy = "EA", basis = "trailing 12 months" }
deposits = { file = "deposits.csv", unit = "percent", compounding = "continuous", tenor = "12m" }
[economies]
EA = "AAA"
"""

COLUMNS = """
interval = "month"
[[market]]
name = "Own"
kind = "columns"
horizons = ["3m"]
by = "entity"
[market.data]
panel = { file = "panel.csv", entity = "country", signal = "spread", legs = [
  { name = "excess return", column = "rx", weight = 1, null = 0, role = "return" },
  { name = "rate rise", column = "dy", weight = 1, null = 1, role = "fundamental" } ] }
"""


def write(folder: Path, study: str, **files: pd.DataFrame) -> Path:
    """Write a study and its files; the path of the study."""
    for name, frame in files.items():
        frame.to_csv(folder / f"{name}.csv", index=False)
    path = folder / "study.toml"
    path.write_text(study, encoding="utf-8")
    return path


def walk(rng: np.random.Generator, level: float, step: float, persistence: float = 0.97) -> np.ndarray:
    """A persistent series around a level."""
    found = np.empty(len(MONTHS))
    now = 0.0
    for t in range(len(MONTHS)):
        now = persistence * now + step * rng.standard_normal()
        found[t] = level + now
    return found


def currencies(seed: int = 1, codes: tuple[str, ...] = ("BBB", "CCC")) -> dict[str, pd.DataFrame]:
    """Spot rates and three-month deposits, in percent, of some currencies and of AAA."""
    rng = np.random.default_rng(seed)
    spot, deposits = [], []
    for code in codes:
        price = np.exp(np.cumsum(0.03 * rng.standard_normal(len(MONTHS))))
        spot.append(pd.DataFrame({"date": DATES, "currency": code, "value": price}))
    for code in ("AAA", *codes):
        rate = walk(rng, 3.0, 0.3)
        deposits.append(pd.DataFrame({"date": DATES, "currency": code, "value": rate}))
    return {"spot": pd.concat(spot), "deposits": pd.concat(deposits)}


def bonds(seed: int = 2) -> dict[str, pd.DataFrame]:
    """Zero yields of one, two and three years in two economies, in percent."""
    rng = np.random.default_rng(seed)
    rows = []
    for economy in ("EA", "EB"):
        short = walk(rng, 3.0, 0.3)
        for years, name in ((1, "1y"), (2, "2y"), (3, "3y")):
            yields = short + 0.3 * years + walk(rng, 0.0, 0.1, 0.8)
            rows.append(pd.DataFrame({"date": DATES, "economy": economy, "maturity": name, "value": yields}))
    return {"yields": pd.concat(rows)}


def equities(seed: int = 3) -> dict[str, pd.DataFrame]:
    """Price, trailing dividends and one-year deposits of one market."""
    rng = np.random.default_rng(seed)
    dividends = np.exp(np.cumsum(0.005 * rng.standard_normal(len(MONTHS))))
    price = dividends / np.exp(walk(rng, -3.3, 0.05))
    return {
        "prices": pd.DataFrame({"date": DATES, "value": 100 * price}),
        "dividends": pd.DataFrame({"date": DATES, "value": 100 * dividends}),
        "deposits": pd.DataFrame({"date": DATES, "currency": "AAA", "value": walk(rng, 3.0, 0.2)}),
    }


def columns(seed: int = 4) -> dict[str, pd.DataFrame]:
    """A panel whose two legs add up to the signal."""
    rng = np.random.default_rng(seed)
    rows = []
    for country in ("EA", "EB", "EC"):
        spread = walk(rng, 0.0, 1.0, 0.9)
        rx = 0.5 * spread + rng.standard_normal(len(MONTHS))
        rows.append(pd.DataFrame({"date": DATES, "country": country, "spread": spread, "rx": rx, "dy": spread - rx}))
    return {"panel": pd.concat(rows)}
