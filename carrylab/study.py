"""Study files: TOML in, a checked `Study` out. The only place where options are validated."""

from __future__ import annotations

import os
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any, get_args

from carrylab import options
from carrylab.data.calendar import INTERVALS, MONTHS_IN, Tenor, steps_in
from carrylab.errors import StudyError
from carrylab.options import PARITIES, Inference, Market, Study
from carrylab.questions import read_questions
from carrylab.schema import (
    Problems,
    Reader,
    choice,
    draws,
    mapping,
    nearest,
    number,
    period,
    read_table,
    rho,
    several,
    tenor,
    text,
    whole,
)
from carrylab.sources import KIND_ROLES, read_controls, read_panel_columns, read_sources, read_surveys

INFERENCE: dict[str, Reader] = {
    "errors": choice(options.ERRORS),
    "lags": whole(0),
    "factor": choice(get_args(options.Factor)),
    "reference": choice(get_args(options.Reference)),
}
SETTINGS: dict[str, Reader] = {
    "interval": choice(INTERVALS),
    "from": period,
    "until": period,
    "home": text,
    "horizons": several(tenor),
}
MARKET: dict[str, Reader] = {
    **SETTINGS,
    **INFERENCE,
    "name": text,
    "kind": choice(tuple(PARITIES)),
    "parities": several(text),
    "by": choice(get_args(options.By)),
    "effects": choice(get_args(options.Effects)),
    "tolerance": number(0, 10),
    "max_gap": whole(0, 366),
    "leave_out": several(text),
    "data": lambda value: value,
    "controls": lambda value: value,
    "surveys": lambda value: value,
}
KIND_KEYS: dict[str, dict[str, Reader]] = {
    "bonds": {
        "maturities": several(tenor),
        "missing_maturity": choice(get_args(options.MissingMaturity)),
        "short": tenor,
    },
    "currencies": {
        "missing_tenor": choice(get_args(options.MissingTenor)),
        "pegs": several(text),
        "offshore": several(text),
    },
    "equities": {
        "rho": rho,
        "currency": choice(get_args(options.EquityCurrency)),
        "missing_tenor": choice(get_args(options.MissingTenor)),
        "indices": mapping(text),
    },
    "columns": {},
}
TOP: dict[str, Reader] = {
    **SETTINGS,
    "title": text,
    "economies": mapping(text),
    "inference": lambda value: value,
    "market": lambda value: value,
    "evidence": lambda value: value,
    "state": lambda value: value,
    "period": lambda value: value,
}
DATA_RULES = ("missing_maturity", "missing_tenor", "controls", "surveys")
RENAMED = {"from": "first", "until": "last", "indices": "index_economy"}


def read_study(path: str | os.PathLike[str]) -> Study:
    """Read and check a study file.

    Raises StudyError with one line a problem: the file, the key, its value and what is allowed.
    """
    where = Path(path)
    raw, body = _load(where)
    problems = Problems(where.name)
    top = read_table(raw, TOP, "top level", problems)
    inference = _inference(top.get("inference", {}), problems)
    tables = top.get("market")
    if not isinstance(tables, list) or not tables:
        problems.add("top level, key market", "a study needs at least one [[market]] table")
        tables = []
    markets = [_market(table, at, (where, top, inference), problems) for at, table in enumerate(tables, 1)]
    names = [market.name for market in markets if market]
    for name in sorted({name for name in names if names.count(name) > 1}):
        problems.add(f"market {name!r}, key name", "two markets have this name; each needs its own")
    questions = read_questions(top, where, problems)
    if problems.lines:
        raise StudyError("\n".join(problems.lines))
    return Study(
        path=where,
        text=body,
        title=top.get("title", where.stem),
        home=top.get("home"),
        economies=top.get("economies", {}),
        markets=tuple(market for market in markets if market),
        questions=questions,
    )


def _load(path: Path) -> tuple[dict[str, Any], str]:
    try:
        body = path.read_bytes().decode("utf-8-sig")
    except FileNotFoundError:
        raise StudyError(f"{path}: no such study file; check the path") from None
    except IsADirectoryError:
        raise StudyError(f"{path}: is a folder; give the study file in it, such as study.toml") from None
    except PermissionError:
        why = "is a folder; give the study file in it" if path.is_dir() else "may not be read (permission denied)"
        raise StudyError(f"{path}: {why}") from None
    except UnicodeDecodeError as wrong:
        raise StudyError(f"{path}: byte {wrong.start} is no UTF-8; save the study file as UTF-8") from None
    try:
        return tomllib.loads(body), body
    except tomllib.TOMLDecodeError as wrong:
        raise StudyError(f"{path}: is no valid TOML: {wrong}") from None


def _inference(raw: Any, problems: Problems) -> dict[str, Any]:
    readers = {
        **INFERENCE,
        "confidence": number(0, 1),
        "draws": draws,
        "joint": choice(get_args(options.Joint)),
        "seed": whole(0),
    }
    return read_table(raw, readers, "[inference]", problems)


def _market(
    raw: Any, at: int, shared: tuple[Path, Mapping[str, Any], Mapping[str, Any]], problems: Problems
) -> Market | None:
    path, top, inference = shared
    before = len(problems.lines)
    raw = raw if isinstance(raw, dict) else {}
    place = f"market {raw['name']!r}" if isinstance(raw.get("name"), str) else f"[[market]] number {at}"
    for key in ("name", "kind", "data"):
        if key not in raw:
            problems.add(place, f"the key {key} is missing")
    kind = raw.get("kind")
    values = read_table(raw, {**MARKET, **KIND_KEYS.get(str(kind), {})}, place, problems)
    if "kind" not in values or "name" not in values:
        return None
    data = _data(values.pop("data", {}), values, place, problems)
    settings = {key: top[key] for key in SETTINGS if key in top} | values
    surveys = read_surveys(settings.pop("surveys", []), (path, place), problems)
    controls = read_controls(settings.pop("controls", []), (path, place), problems)
    if kind == "columns":
        sources, panel = read_panel_columns(data.get("panel", {}), (path, place), problems)
    else:
        sources, panel = read_sources(data, values["kind"], (path, place), problems), None
    _settle(settings, place, problems)
    if len(problems.lines) > before:
        return None
    chosen = dict(inference) | {key: settings.pop(key) for key in INFERENCE if key in settings}
    fields = {RENAMED.get(key, key): value for key, value in settings.items()}
    fields.setdefault("home", None)
    return Market(
        **fields, inference=Inference(**chosen), sources=sources, controls=controls, surveys=surveys, panel=panel
    )


def _data(raw: Any, values: dict[str, Any], place: str, problems: Problems) -> dict[str, Any]:
    """Read the keys of `[market.data]`; the rules that may stand there move to the market's own values."""
    kind = values["kind"]
    roles = ("panel",) if kind == "columns" else KIND_ROLES[kind]
    known = MARKET | KIND_KEYS[kind]
    readers: dict[str, Reader] = {role: (lambda value: value) for role in roles}
    readers |= {key: known[key] for key in DATA_RULES if key in known}
    data = read_table(raw, readers, f"{place}, data", problems)
    for key in DATA_RULES:
        if key in data and key in values:
            problems.add(f"{place}, data, key {key}", "stands in the market and in its data; once is enough")
        if key in data:
            values[key] = data.pop(key)
    return data


def _settle(settings: dict[str, Any], place: str, problems: Problems) -> None:
    """Fill defaults that depend on the kind, and check keys against each other."""
    kind, allowed = settings["kind"], PARITIES[settings["kind"]]
    parities = settings.setdefault("parities", allowed if kind == "columns" else None)
    if parities is None:
        settings["parities"] = parities = ()
        problems.add(place, f"the key parities is missing; allowed: {', '.join(allowed)}")
    for parity in parities:
        if parity not in allowed:
            hint = nearest(parity, allowed)
            problems.add(
                f"{place}, key parities",
                f"{parity!r} is not allowed for {kind}; allowed: {', '.join(allowed)}{hint}",
            )
    if "interval" not in settings:
        problems.add(place, f"the key interval is missing here and at the top; allowed: {', '.join(INTERVALS)}")
    _check_horizons(settings, parities, place, problems)
    if kind == "currencies" and "home" not in settings:
        problems.add(place, "the key home is missing here and at the top; name the home currency")
    first, last = settings.get("from"), settings.get("until")
    if first and last and first[: len(last)] > last[: len(first)]:
        problems.add(f"{place}, key until", f"{last!r} lies before from = {first!r}; allowed is a later date")


def _check_horizons(settings: dict[str, Any], parities: Any, place: str, problems: Problems) -> None:
    distant = ("forward-spot-far", "yield-spread-to-maturity")
    if any(parity in distant for parity in parities) and "short" not in settings:
        problems.add(place, 'the key short is missing; a distant bond parity needs it, such as short = "12m"')
    horizons: tuple[Tenor, ...] = settings.setdefault("horizons", ())
    if not horizons and any(parity not in distant for parity in parities):
        problems.add(place, 'the key horizons is missing here and at the top; such as horizons = ["12m"]')
    interval = settings.get("interval")
    for horizon in horizons:
        if interval in MONTHS_IN and steps_in(horizon, interval) is None:
            problems.add(
                f"{place}, key horizons",
                f"{str(horizon)!r} is no whole number of {interval}s; allowed are multiples",
            )
        if "dividend-price" in parities and (horizon.days or horizon.months % 12):
            problems.add(
                f"{place}, key horizons",
                f"{str(horizon)!r} is not allowed with dividend-price; allowed are whole years, multiples of 12m",
            )
