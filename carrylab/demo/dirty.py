"""The dirty demo set: one market, one mistake, and an answer key that names each."""

from __future__ import annotations

from itertools import chain
from pathlib import Path

from carrylab.demo.dirty_currencies import currency_cases
from carrylab.demo.dirty_others import bond_cases, column_cases, equity_cases
from carrylab.demo.files import write_rows
from carrylab.demo.plants import Case
from carrylab.demo.studies import HEAD
from carrylab.demo.world import World

KEY = ("check", "level", "study", "market", "file", "series", "first", "last", "also", "planted")
TITLE = """\
# Every market below holds one planted mistake; key.csv says which. All data are made up.
title    = "Dirty data"
"""


def cases(world: World) -> list[Case]:
    """All planted mistakes, in the order of the answer key."""
    return [*bond_cases(world), *currency_cases(world), *equity_cases(world), *column_cases(world)]


def write_dirty(world: World, folder: Path) -> None:
    """Write the dirty set into a folder that exists."""
    planted = cases(world)
    for name, file in chain.from_iterable(case.files.items() for case in planted):
        write_rows(folder / name, file.header, file.rows)
    for study in dict.fromkeys(case.study for case in planted):
        parts = [TITLE + HEAD, *(case.toml for case in planted if case.study == study)]
        (folder / study).write_text("\n".join(parts), encoding="utf-8", newline="\n")
    lines = [
        (p.check, p.level, case.study, case.market, p.file, p.series, p.first, p.last, p.also, p.planted)
        for case in planted
        for p in case.key
    ]
    write_rows(folder / "key.csv", KEY, lines)
