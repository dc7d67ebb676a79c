"""Rows that keep account: what was read and dropped, what the checks saw, how well each identity holds."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from carrylab.data.checks import Check
from carrylab.data.read import MarketData
from carrylab.evidence.setting import Fit
from carrylab.markets.parity import Identity, Parity

LEDGER = ("read", "missing", "duplicates", "outside", "superseded", "used")
Row = dict[str, Any]


def ledger_rows(data: MarketData) -> list[Row]:
    """One row a series and reason: how many cells were read, dropped and why, and used."""
    rows = []
    for tables in (*data.tables.values(), data.controls, data.surveys):
        for table in tables:
            for entry in table.ledger.itertuples():
                place = {
                    "section": "ledger",
                    "market": data.market.name,
                    "leg": f"{table.source.role}: {entry.file}",
                    "group": entry.series,
                    "first": entry.first,
                    "last": entry.last,
                }
                rows += [place | {"term": reason, "estimate": getattr(entry, reason)} for reason in LEDGER]
    return rows


def regression_ledger_rows(fit: Fit) -> list[Row]:
    """How many rows of each leg and of the signal stand, and how many are used because all of them stand."""
    sample, place = fit.sample, fit.place()
    cells = {"cells": sample.mask.size, "used": fit.estimate.n_obs}
    standing = sample.standing.sum(axis=0)
    cells |= {f"{name} stands": int(n) for name, n in zip((*sample.terms, *sample.legs), standing, strict=True)}
    return [place | {"section": "ledger", "term": term, "estimate": count} for term, count in cells.items()]


def check_rows(market: str, checks: Iterable[Check]) -> list[Row]:
    """One row a finding of the load checks."""
    return [
        {
            "section": "check",
            "rank": check.level,
            "market": market,
            "leg": check.file,
            "group": check.series,
            "sample": str(number),
            "term": check.id,
            "first": check.first,
            "last": check.last,
            "note": check.line(),
        }
        for number, check in enumerate(checks, 1)
    ]


def identity_row(parity: Parity, proof: Identity) -> Row:
    """The largest gap between the signal and the weighted sum of its legs."""
    where = f"largest at {proof.entity}, {proof.date}" if proof.rows else "no row has the signal and every leg"
    return {
        "section": "identity",
        "market": parity.market,
        "parity": parity.name,
        "horizon": str(parity.horizon),
        "interval": parity.calendar.interval,
        "group": "pooled",
        "term": "largest gap",
        "estimate": proof.gap,
        "n_obs": proof.rows,
        "note": "; ".join((where, f"tolerance {parity.tolerance:.0e}", *parity.notes)),
    }
