"""Many tests: every p-value of a run gets its adjusted ones beside it, over all tests of its kind in the study."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from carrylab.evidence.setting import Row
from carrylab.regression.many import false_discovery, holm

PLACE = ("market", "parity", "horizon", "group")
PAID = ("nothing paid", "nothing paid, by draws")


def adjust(rows: Iterable[Row]) -> list[Row]:
    """The rows with `p_holm`, `p_fdr`, `p_stepdown` and `n_tests` where they have a p-value.

    Tests of one kind, the same section, rank, role and term anywhere in the study, are one family of `n_tests`.
    Stepped-down values come from the joint draws of a market, for the test that nothing is paid.
    """
    given = list(rows)
    families: dict[tuple[object, ...], list[Row]] = {}
    for row in given:
        if _tested(row):
            families.setdefault(tuple(row.get(key) for key in ("section", "rank", "role", "term")), []).append(row)
    for family in families.values():
        p_values = np.array([row["p_value"] for row in family], dtype=np.float64)
        for row, by_holm, by_rate in zip(family, holm(p_values), false_discovery(p_values), strict=True):
            row |= {"p_holm": float(by_holm), "p_fdr": float(by_rate), "n_tests": len(family)}
    stepped = {_place(row): row["p_value"] for row in given if row.get("term") == "stepdown"}
    for row in given:
        if row.get("term") in PAID and _place(row) in stepped:
            row["p_stepdown"] = stepped[_place(row)]
    return given


def _tested(row: Row) -> bool:
    value = row.get("p_value")
    return value is not None and bool(np.isfinite(value)) and row.get("term") != "stepdown"


def _place(row: Row) -> tuple[object, ...]:
    return tuple(row.get(key) for key in PLACE)
