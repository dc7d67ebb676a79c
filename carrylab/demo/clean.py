"""The clean demo set: data files, two studies and the population values they were drawn from."""

from __future__ import annotations

from pathlib import Path

from carrylab.demo.economies import CODES, ECONOMIES
from carrylab.demo.files import (
    activity_rows,
    cross_rows,
    deposit_rows,
    fixed,
    forward_rows,
    index_rows,
    recession_rows,
    spot_rows,
    write_rows,
    zero_rows,
)
from carrylab.demo.population import population
from carrylab.demo.rates import MATURITIES, TENORS
from carrylab.demo.studies import CLEAN, CONTROLLED
from carrylab.demo.world import World

SPARSE = {"3m": 3, "1y": 12, "2y": 24, "5y": 60, "10y": 120}


def write_clean(world: World, folder: Path) -> None:
    """Write the clean set into a folder that exists."""
    tenors = [f"{tenor}m" for tenor in TENORS]
    months = MATURITIES.tolist()
    write_rows(folder / "zero_yields.csv", ["date", "economy", *(f"{n}m" for n in months)], zero_rows(world, months))
    sparse = zero_rows(world, list(SPARSE.values()))
    write_rows(folder / "zero_yields_sparse.csv", ["date", "economy", *SPARSE], sparse)
    write_rows(folder / "deposit_rates.csv", ["date", "currency", *tenors], deposit_rows(world))
    write_rows(folder / "fx_spot.csv", ["date", "pair", "bid", "ask"], spot_rows(world))
    write_rows(folder / "fx_crosses.csv", ["date", "pair", "bid", "ask"], cross_rows(world))
    write_rows(folder / "fx_forwards.csv", ["date", "pair", "tenor", "bid", "ask"], forward_rows(world))
    for name in ("price", "dividend", "total_return"):
        write_rows(folder / f"equity_{name}.csv", ["date", *CODES], index_rows(world, getattr(world, name)))
    write_rows(folder / "growth.csv", ["date", *CODES], activity_rows(world))
    write_rows(folder / "recessions.csv", ["from", "until"], recession_rows(world))
    write_answers(folder)


def write_answers(folder: Path) -> None:
    """Write what does not depend on the seed: the studies, the list of economies and the population values."""
    (folder / "study.toml").write_text(CLEAN, encoding="utf-8", newline="\n")
    (folder / "controls.toml").write_text(CONTROLLED, encoding="utf-8", newline="\n")
    who = [(e.code, e.name, e.currency, e.day_count, e.since, e.until, e.role) for e in ECONOMIES]
    header = ["economy", "name", "currency", "day_count", "since", "until", "role"]
    write_rows(folder / "economies.csv", header, who)
    slopes = [(s.market, s.parity, s.leg, s.horizon, s.group, fixed(s.value, 4), s.how) for s in population()]
    write_rows(
        folder / "population.csv",
        ["market", "parity", "leg", "horizon", "group", "value", "how"],
        slopes,
    )
