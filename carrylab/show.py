"""One row worked in the open: the raw cells, then the signal, the legs and their sum."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from types import MappingProxyType
from typing import TypeVar

import numpy as np
import pandas as pd

from carrylab.data.calendar import Floats, parse_tenor
from carrylab.data.read import MarketData, Table
from carrylab.errors import StudyError
from carrylab.markets.parity import Entity, Parity
from carrylab.options import Market, Study
from carrylab.runner import Built, build
from carrylab.schema import nearest

Thing = TypeVar("Thing", Market, Parity)
FORMULAS: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "forward-spot": (
            "signal p_t(n-h) - p_t(n) - h y_t(h), with p(n) = -n y(n)",
            "excess return p_{t+h}(n-h) - p_t(n) - h y_t(h), rate rise (n-h) [y_{t+h}(n-h) - y_t(n-h)]",
        ),
        "forward-spot-far": (
            "signal p_t(n-k) - p_t(n) - k y_t(k), with p(n) = -n y(n) and k the short maturity",
            "rate rise k [y_{t+n-k}(k) - y_t(k)], excess return of the n-bond over the (n-k)-bond held n-k years",
        ),
        "yield-spread": (
            "signal m/(n-m) [y_t(n) - y_t(m)], m the horizon",
            "excess return over n-m, long-rate rise y_{t+m}(n-m) - y_t(n)",
        ),
        "yield-spread-to-maturity": (
            "signal y_t(n) - y_t(m), n = k m",
            "average of the k m-rates from t less today's, average excess return of the n-bond over rolling m-bonds",
        ),
        "uncovered-interest": (
            "signal h (i* - i), excess return s_{t+h} - s_t + h (i* - i), appreciation s_{t+h} - s_t",
            "s is the log home price of one unit of foreign currency",
        ),
        "forward-discount": (
            "signal s_t - f_t, excess return s_{t+h} - f_t, appreciation s_{t+h} - s_t",
            "s is the log home price of one unit of foreign currency",
        ),
        "dividend-price": (
            "signal ln(D/P); legs are sums over years j of rho^(j-1) x, the future ratio has weight rho^h",
            "approximation [ln((P'+D')/P) - sum of monthly returns] - [ln(1+e^-dp') + rho dp'] of each year",
        ),
        "carry": ("signal: the return over the horizon if prices stay where they are",),
        "columns": ("signal and legs as they stand in the file",),
    }
)


def show_row(study: Study, *, market: str | None, parity: str | None, entity: str | None, date: str | None) -> str:
    """The text of one worked row; what is not named is the first market, its first parity and its last whole row.

    Raises StudyError where a name or a date is not among those of the study.
    """
    chosen = _named(study.markets, market, "market")
    built = build(chosen, study.economies)
    parities = built.parities
    if parity:
        _named(parities, parity, "parity")
        parities = tuple(one for one in parities if one.name == parity)
    found = parities[0]
    t, i = _row(found, entity, date)
    return "\n".join(_lines(built, found, t, i))


def _named(things: Iterable[Thing], name: str | None, word: str) -> Thing:
    listed = list(things)
    names = [thing.name for thing in listed]
    if name is None:
        return listed[0]
    if name not in names:
        known = ", ".join(dict.fromkeys(names))
        raise StudyError(f"--{word} {name!r}: no such {word}; allowed: {known}{nearest(name, names)}")
    return listed[names.index(name)]


def whole_rows(parity: Parity) -> Floats:
    """(T, N): 1.0 where the signal and every leg stand, else 0.0."""
    stands = np.isfinite(parity.signal)
    for leg in parity.legs:
        stands &= np.isfinite(leg.values)
    return stands.astype(np.float64)


def _row(parity: Parity, entity: str | None, date: str | None) -> tuple[int, int]:
    stands = whole_rows(parity)
    names = [one.name for one in parity.entities]
    if entity is not None:
        if entity not in names:
            raise StudyError(f"--entity {entity!r}: not in this market; allowed: {', '.join(names)}")
        only = np.zeros_like(stands)
        only[:, names.index(entity)] = 1.0
        stands = stands * only
    if date is not None:
        labels = [parity.calendar.label(row) for row in range(len(parity.calendar))]
        if date not in labels:
            raise StudyError(f"--date {date!r}: not on this calendar; allowed are {labels[0]} to {labels[-1]}")
        stands = stands * (np.array(labels) == date)[:, None]
    rows, columns = np.nonzero(stands)
    if not len(rows):
        raise StudyError(f"{parity.market}, {parity.name}: no row has the signal and every leg there; try another")
    return int(rows[-1]), int(columns[rows == rows[-1]][0])


def _lines(built: Built, parity: Parity, t: int, i: int) -> list[str]:
    calendar, entity = parity.calendar, parity.entities[i]
    end = int(parity.window.ends[t])
    head = f"{parity.market}, {parity.name}, {entity.name}: {parity.horizon} from {calendar.label(t)}"
    lines = [f"{head} to {calendar.label(end)}", "", "Raw cells"]
    for tables in built.data.tables.values():
        for table in tables:
            lines += _cells(table, entity, _tenors(parity, entity), built.data, (t, end))
    lines += ["", "As built (log units over the horizon)", *(f"  {text}" for text in FORMULAS[parity.name])]
    lines.append(f"  {'signal: ' + parity.signal_name:<46}{'':>10}{parity.signal[t, i]:>14.8f}")
    for leg in parity.legs:
        weight = "" if leg.weight is None else f"x {leg.weight:+.4f}"
        lines.append(f"  {leg.name:<46}{weight:>10}{leg.values[t, i]:>14.8f}")
    if all(leg.weight is not None for leg in parity.legs):
        total = sum(leg.weight * float(leg.values[t, i]) for leg in parity.legs if leg.weight is not None)
        lines.append(f"  {'sum of weight x leg':<46}{'':>10}{total:>14.8f}")
        lines.append(f"  {'signal less sum':<46}{'':>10}{float(parity.signal[t, i]) - total:>14.1e}")
    return [*lines, "", *(f"Note: {note}." for note in parity.notes)]


def _tenors(parity: Parity, entity: Entity) -> set[str]:
    wanted = {parity.horizon.canonical}
    if entity.maturity:
        maturity = parse_tenor(entity.maturity)
        wanted |= {maturity.canonical, (maturity - parity.horizon).canonical}
    return wanted


def _cells(table: Table, entity: Entity, tenors: set[str], data: MarketData, rows: tuple[int, int]) -> list[str]:
    frame = table.frame
    keep = frame["ordinal"].isin([int(data.calendar.ordinals[row]) for row in rows])
    for key in table.keys:
        if key in ("maturity", "tenor"):
            keep &= frame[key].isin(tenors)
        elif key == "pair":
            keep &= frame[key].str.contains(entity.currency, regex=False)
        elif key == "currency" and entity.currency:
            keep &= frame[key].isin([entity.currency, data.market.home])
        else:
            keep &= frame[key] == entity.group(key)
    return [_cell(row, table.keys) for _, row in frame[keep].iterrows()]


def _cell(row: pd.Series, keys: tuple[str, ...]) -> str:
    code = " ".join(str(row[key]) for key in keys)
    numbers = {name: row[name] for name in row.index if name not in {"file", "row", "date", "ordinal", *keys}}
    shown = "  ".join(f"{name} {value:.10g}" for name, value in numbers.items())
    return f"  {row['file']} row {row['row']:<6} {row['date']:%Y-%m-%d}  {code:<14} {shown}"
