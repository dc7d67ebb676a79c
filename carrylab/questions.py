"""The further questions of a study file: `[evidence]`, `[[state]]` and `[[period]]`, each read once."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any, TypeVar

from carrylab.options import Breaks, Forecast, Period, Profile, Questions, Rule, State, Windows
from carrylab.schema import NotAllowedError, Problems, Reader, number, period, read_table, switch, tenor, text, whole
from carrylab.sources import STATE, state_source

Record = TypeVar("Record")
EVIDENCE: dict[str, Reader] = {
    "horizons": lambda value: value,
    "windows": lambda value: value,
    "breaks": lambda value: value,
    "forecast": lambda value: value,
    "years": switch,
    "parts": switch,
    "across": switch,
    "components": whole(1, 12),
}
PROFILE: dict[str, Reader] = {"until": tenor, "every": tenor, "common_sample": switch}
WINDOWS: dict[str, Reader] = {"rolling": tenor, "expanding": tenor, "every": tenor}
BREAKS: dict[str, Reader] = {"trim": number(0, 0.5)}
FORECAST: dict[str, Reader] = {"first": tenor, "rolling": tenor, "risk_aversion": number(0, 1000)}
PERIOD: dict[str, Reader] = {"name": text, "from": period, "until": period}


ABOVE = re.compile(r"(?P<series>\S.*?) (?P<side>above|below) (?:(?P<zero>zero)|its (?P<what>median|mean))")
IN_PART = re.compile(r"(?P<series>\S.*?) in its (?P<side>top|bottom) (?P<part>half|third|quarter|fifth|tenth)")
PARTS_OF = {"half": 2, "third": 3, "quarter": 4, "fifth": 5, "tenth": 10}


def rule(value: Any) -> Rule:
    """A series against its own level, in words."""
    words = text(value).strip()
    above, part = ABOVE.fullmatch(words), IN_PART.fullmatch(words)
    if above:
        mark: Any = "zero" if above["zero"] else {"median": 0.5, "mean": "mean"}[above["what"]]
        return Rule(above["series"], "above" if above["side"] == "above" else "below", mark)
    if part:
        share = 1.0 / PARTS_OF[part["part"]]
        return Rule(part["series"], *(("above", 1.0 - share) if part["side"] == "top" else ("below", share)))
    raise NotAllowedError(
        'allowed are such as "signal above zero", "signal below its median", "growth above its mean", '
        '"volatility in its top third"'
    )


def read_questions(top: Mapping[str, Any], path: Path, problems: Problems) -> Questions:
    """Read everything a study asks beyond its headline; mistakes become problems."""
    asked = read_table(top.get("evidence", {}), EVIDENCE, "[evidence]", problems)
    tables: dict[str, tuple[Callable[..., Any], dict[str, Reader], tuple[str, ...]]] = {
        "horizons": (Profile, PROFILE, ("until",)),
        "windows": (Windows, WINDOWS, ()),
        "breaks": (Breaks, BREAKS, ()),
        "forecast": (Forecast, FORECAST, ("first",)),
    }
    for key, (make, readers, needed) in tables.items():
        if key in asked:
            asked[key] = _record(asked[key], make, readers, (f"[evidence], {key}", needed), problems)
    if asked.get("windows") == Windows():
        problems.add("[evidence], windows", 'name a length, such as rolling = "120m" or expanding = "120m"')
    states = _states(top.get("state", []), path, problems)
    periods = _periods(top.get("period", []), problems)
    _require_names([*(one.name for one in states), *(one.name for one in periods)], problems)
    return Questions(**asked, states=states, periods=periods)


def _record(
    raw: Any,
    make: Callable[..., Record],
    readers: Mapping[str, Reader],
    place: tuple[str, tuple[str, ...]],
    problems: Problems,
) -> Record | None:
    where, needed = place
    values = read_table(raw, readers, where, problems)
    missing = [key for key in needed if key not in values]
    for key in missing:
        problems.add(where, f'the key {key} is missing; give a length of time, such as {key} = "60m"')
    return None if missing else make(**values)


def _tables(raw: Any, place: str, problems: Problems) -> list[Any]:
    if not isinstance(raw, list):
        problems.add(place, f"{raw!r} is not allowed; allowed are tables in double brackets")
        return []
    return raw


def _states(raw: Any, path: Path, problems: Problems) -> tuple[State, ...]:
    found = []
    for at, table in enumerate(_tables(raw, "[[state]]", problems), 1):
        place = f"[[state]] number {at}"
        values = read_table(table, {**STATE, "name": text, "rule": rule, "known": switch}, place, problems)
        if "name" not in values:
            problems.add(place, "the key name is missing")
            continue
        if ("file" in table) == ("rule" in table):
            problems.add(place, "give either file or rule; allowed is one of them")
        if ("file" in values) == ("rule" in values):
            continue
        own = {key: values.pop(key) for key in ("name", "rule", "known") if key in values}
        source = state_source(values, own["name"], path) if values else None
        found.append(State(source=source, **own))
    return tuple(found)


def _periods(raw: Any, problems: Problems) -> tuple[Period, ...]:
    found = []
    for at, table in enumerate(_tables(raw, "[[period]]", problems), 1):
        place = f"[[period]] number {at}"
        values = read_table(table, PERIOD, place, problems)
        if "name" not in values:
            problems.add(place, "the key name is missing")
        elif "from" not in values and "until" not in values:
            problems.add(place, 'give from, until or both; such as from = "2000-01"')
        else:
            found.append(Period(values["name"], values.get("from"), values.get("until")))
    return tuple(found)


def _require_names(names: list[str], problems: Problems) -> None:
    for name in sorted({name for name in names if names.count(name) > 1}):
        problems.add("[[state]] and [[period]]", f"the name {name!r} is used twice; each needs its own")
