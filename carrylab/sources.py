"""The declarations of data files in a study: which keys each kind of series takes, and what it cannot do without."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any, get_args

from carrylab import options
from carrylab.options import LegColumn, PanelColumns, Source, Survey
from carrylab.schema import (
    Problems,
    Reader,
    by_code,
    choice,
    codec,
    delay,
    mapping,
    number,
    one_character,
    pattern,
    read_table,
    several,
    switch,
    tenor,
    text,
    texts,
)

CODES = ("economy", "currency", "pair", "index", "entity", "maturity")
READING: dict[str, Reader] = {
    "file": text,
    "columns": mapping(text),
    "date_order": choice(("ymd", "dmy", "mdy")),
    "decimal": choice((".", ",")),
    "separator": one_character,
    "encoding": codec,
    "missing": texts,
}
SERIES: dict[str, Reader] = {
    **READING,
    **dict.fromkeys(CODES, text),
    "spread": choice((*CODES, "tenor")),
    "pattern": pattern,
    "known_after": delay,
    "timing": choice(get_args(options.Timing)),
}
RATE: dict[str, Reader] = {
    **SERIES,
    "unit": choice(get_args(options.Unit)),
    "compounding": choice(get_args(options.Compounding)),
    "day_count": by_code(choice(get_args(options.DayCount))),
    "tenor": tenor,
}
PRICE: dict[str, Reader] = {
    **SERIES,
    "quote": choice(get_args(options.Quote)),
    "scale": by_code(number(0, 1e12)),
    "tenor": tenor,
}
DIVIDEND: dict[str, Reader] = {**SERIES, "basis": choice(get_args(options.Basis))}
CONTROL: dict[str, Reader] = {**SERIES, "name": text}
STATE: dict[str, Reader] = {**SERIES}
SURVEY: dict[str, Reader] = {
    **SERIES,
    "leg": text,
    "horizon": tenor,
    "growth": switch,
    "unit": choice(get_args(options.Unit)),
}
ROLES: dict[str, dict[str, Reader]] = {
    "zero_yields": RATE,
    "deposits": RATE,
    "spot": PRICE,
    "forwards": PRICE,
    "prices": SERIES,
    "dividends": DIVIDEND,
    "total_return": SERIES,
}
KIND_ROLES: dict[str, tuple[str, ...]] = {
    "bonds": ("zero_yields",),
    "currencies": ("spot", "forwards", "deposits"),
    "equities": ("prices", "dividends", "total_return", "deposits", "spot", "forwards"),
}
LEG: dict[str, Reader] = {
    "name": text,
    "column": text,
    "weight": number(-1e6, 1e6),
    "null": number(-1e6, 1e6),
    "role": choice(get_args(options.Role)),
    "one_step": text,
}
PANEL: dict[str, Reader] = {
    **READING,
    "entity": text,
    "signal": text,
    "controls": several(text),
    "legs": lambda value: value,
    "known_after": delay,
}
NEEDS: dict[str, tuple[str, ...]] = {
    "zero_yields": ("file", "unit", "compounding"),
    "deposits": ("file", "unit", "compounding"),
    "spot": ("file", "quote"),
    "forwards": ("file", "quote"),
    "dividends": ("file", "basis"),
}
NEEDED_ROLES: dict[str, tuple[tuple[str, ...], ...]] = {
    "bonds": (("zero_yields",),),
    "currencies": (("spot",), ("deposits", "forwards")),
    "equities": (("prices",), ("dividends", "total_return"), ("deposits",)),
}
ALLOWED_FOR: dict[str, str] = {
    "unit": "percent, decimal, basis points",
    "compounding": ", ".join(get_args(options.Compounding)),
    "quote": ", ".join(get_args(options.Quote)),
    "basis": ", ".join(get_args(options.Basis)),
    "file": "the path of a data file, relative to the study file",
}


def read_sources(
    tables: Mapping[str, Any], kind: str, at: tuple[Path, str], problems: Problems
) -> dict[str, tuple[Source, ...]]:
    """Read the `[market.data]` table of a bond, currency or equity market: role -> declared files."""
    path, place = at
    sources = {}
    for role in KIND_ROLES[kind]:
        entries = tables.get(role, [])
        listed = entries if isinstance(entries, list) else [entries]
        read = (_source(entry, role, (path, f"{place}, data.{role}"), problems) for entry in listed)
        sources[role] = tuple(source for source in read if source)
    for either in NEEDED_ROLES[kind]:
        if not any(role in tables for role in either):
            problems.add(
                f"{place}, data",
                f"{kind} need {' or '.join(either)}; declare the file, its unit and its timing",
            )
    return {role: found for role, found in sources.items() if found}


def _source(raw: Any, role: str, at: tuple[Path, str], problems: Problems) -> Source | None:
    path, place = at
    before = len(problems.lines)
    values = read_table(raw, ROLES[role], place, problems)
    for key in NEEDS.get(role, ("file",)):
        if isinstance(raw, dict) and key not in raw:
            problems.add(place, f"the key {key} is missing; allowed: {ALLOWED_FOR[key]}")
    if values.get("compounding") in ("simple", "discount") and "day_count" not in values:
        allowed = ", ".join(get_args(options.DayCount))
        problems.add(place, f"the key day_count is missing; a {values['compounding']} rate needs one of {allowed}")
    if values.get("quote") == "points" and role == "spot":
        problems.add(f"{place}, key quote", "'points' is not allowed for spot; points are quoted on a spot rate")
    if values.get("quote") == "points" and "scale" not in values:
        problems.add(place, "the key scale is missing; points need it, such as scale = 10000")
    if len(problems.lines) > before:
        return None
    return _declare(role, values, path)


def _declare(role: str, values: dict[str, Any], path: Path) -> Source:
    constants = {code: values.pop(code) for code in CODES if code in values}
    return Source(role=role, path=path.parent / values["file"], constants=constants, **values)


def read_controls(raw: Any, at: tuple[Path, str], problems: Problems) -> tuple[Source, ...]:
    """Read the list of added predictors, each a file of its own with a name."""
    path, place = at
    if not isinstance(raw, list):
        problems.add(
            f"{place}, key controls",
            f"{raw!r} is not allowed; allowed is a list of tables with name and file",
        )
        return ()
    controls = []
    for entry in raw:
        before = len(problems.lines)
        values = read_table(entry, CONTROL, f"{place}, controls", problems)
        for key in ("name", "file"):
            if isinstance(entry, dict) and key not in entry:
                problems.add(f"{place}, controls", f"the key {key} is missing")
        if len(problems.lines) == before:
            controls.append(_declare(values.pop("name"), values, path))
    return tuple(controls)


def read_surveys(raw: Any, at: tuple[Path, str], problems: Problems) -> tuple[Survey, ...]:
    """Read the list of survey expectations, each of one leg over one horizon, from a file of its own."""
    path, place = at
    if not isinstance(raw, list):
        problems.add(
            f"{place}, key surveys",
            f"{raw!r} is not allowed; allowed is a list of tables with leg, horizon, unit and file",
        )
        return ()
    surveys = []
    for entry in raw:
        before = len(problems.lines)
        values = read_table(entry, SURVEY, f"{place}, surveys", problems)
        for key in ("leg", "horizon", "unit", "file"):
            if isinstance(entry, dict) and key not in entry:
                problems.add(f"{place}, surveys", f"the key {key} is missing")
        if len(problems.lines) == before:
            leg, horizon, growth = values.pop("leg"), values.pop("horizon"), values.pop("growth", False)
            surveys.append(Survey(leg, horizon, _declare(f"survey of {leg}", values, path), growth))
    places = [(survey.leg, str(survey.horizon)) for survey in surveys]
    for leg, horizon in sorted({one for one in places if places.count(one) > 1}):
        problems.add(
            f"{place}, surveys", f"{leg!r} over {horizon} stands twice; allowed is one survey of a leg and horizon"
        )
    return tuple(surveys)


def state_source(values: dict[str, Any], name: str, path: Path) -> Source:
    """The file of a state: a labelled series by date, or spells with from and until."""
    return _declare(name, values, path)


def read_panel_columns(
    raw: Any, at: tuple[Path, str], problems: Problems
) -> tuple[dict[str, tuple[Source, ...]], PanelColumns | None]:
    """Read the `panel` of a columns market: the file and which of its columns are signal, controls and legs."""
    path, place = at
    before = len(problems.lines)
    values = read_table(raw, PANEL, f"{place}, data.panel", problems)
    for key in ("file", "signal", "legs"):
        if isinstance(raw, dict) and key not in raw:
            problems.add(f"{place}, data.panel", f"the key {key} is missing")
    legs = _legs(values.pop("legs", []), f"{place}, data.panel", problems)
    if len(problems.lines) > before:
        return {}, None
    columns = PanelColumns(values.pop("entity", None), values.pop("signal"), legs, values.pop("controls", ()))
    return {"panel": (_declare("panel", values, path),)}, columns


def _legs(raw: Any, place: str, problems: Problems) -> tuple[LegColumn, ...]:
    if not isinstance(raw, list) or not raw:
        problems.add(f"{place}, key legs", "allowed is a list of tables, each with name and column")
        return ()
    legs = []
    for entry in raw:
        before = len(problems.lines)
        values = read_table(entry, LEG, f"{place}, legs", problems)
        for key in ("name", "column"):
            if isinstance(entry, dict) and key not in entry:
                problems.add(f"{place}, legs", f"the key {key} is missing")
        if len(problems.lines) == before:
            legs.append(LegColumn(**values))
    _check_legs(legs, place, problems)
    return tuple(legs)


def _check_legs(legs: list[LegColumn], place: str, problems: Problems) -> None:
    for attribute in ("name", "column"):
        seen = [getattr(leg, attribute) for leg in legs]
        for twice in sorted({value for value in seen if seen.count(value) > 1}):
            problems.add(f"{place}, key legs", f"two legs have the {attribute} {twice!r}; each needs its own")
    if sum(leg.role == "return" for leg in legs) > 1:
        problems.add(f"{place}, key legs", "two legs have the role 'return'; allowed is one")
