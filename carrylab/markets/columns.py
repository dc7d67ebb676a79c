"""Signals and legs the user has already built, each row standing at its origin date."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from carrylab.data.calendar import Calendar, Floats, Tenor, Window, add, make_calendar, ordinal, window
from carrylab.data.dates import bound
from carrylab.data.read import MarketData, Table
from carrylab.errors import StudyError
from carrylab.markets.parity import Entity, Leg, Parity
from carrylab.options import LegColumn

TOLERANCE = 1e-8


def parities(data: MarketData, economies: Mapping[str, str]) -> list[Parity]:
    """One parity a horizon; the horizon says how far the legs reach, hence how they overlap."""
    return [_parity(data, economies, horizon) for horizon in data.market.horizons]


def _parity(data: MarketData, economies: Mapping[str, str], horizon: Tenor) -> Parity:
    market, (table,) = data.market, data.tables["panel"]
    if market.panel is None:
        raise StudyError(f"market {market.name!r}: a columns market needs a panel; declare it in its data")
    calendar = _reaching(data.calendar, horizon)
    at = window(calendar, horizon, market.max_gap)
    inside = _ends_by(market.last, calendar, at)
    return Parity(
        market=market.name,
        name="columns",
        horizon=horizon,
        calendar=calendar,
        window=at,
        entities=tuple(Entity(code, code, economies.get(code, "")) for code in _codes(table)),
        signal_name=market.panel.signal,
        signal=column(table, market.panel.signal, calendar),
        legs=tuple(_leg(table, leg, calendar, inside) for leg in market.panel.legs),
        tolerance=TOLERANCE if market.tolerance is None else market.tolerance,
    )


def _reaching(calendar: Calendar, horizon: Tenor) -> Calendar:
    """The calendar with the periods in which the last origins' outcomes fall; days are only those observed."""
    if calendar.interval == "day":
        return calendar
    end = ordinal(add(calendar.days[-1:], horizon), calendar.interval)
    return make_calendar(calendar.interval, np.concatenate([calendar.ordinals, end]))


def _ends_by(last: str | None, calendar: Calendar, at: Window) -> np.typing.NDArray[np.bool_]:
    """Origins (T,) whose outcome falls into the study's span: `until` bounds outcomes, too."""
    day = bound(last, upper=True)
    if day is None:
        return np.ones(len(calendar), dtype=bool)
    final = ordinal(np.array([day]), calendar.interval)[0]
    return np.asarray((at.ends >= 0) & (calendar.ordinals[at.ends] <= final))


def _codes(table: Table) -> list[str]:
    return sorted(map(str, table.frame["entity"].unique())) if "entity" in table.keys else ["all"]


def column(table: Table, name: str, calendar: Calendar) -> Floats:
    """One named column of a panel, dense (T, N)."""
    frame, codes = table.frame, _codes(table)
    found = np.full((len(calendar), len(codes)), np.nan)
    at = frame["entity"].cat.set_categories(codes).cat.codes.to_numpy() if "entity" in table.keys else 0
    found[calendar.locate(frame["ordinal"].to_numpy()), at] = frame[name].to_numpy()
    return found


def predictor(table: Table, name: str, parity: Parity) -> Floats:
    """One named column of a panel for the entities of its parity (T, N)."""
    codes = _codes(table)
    return column(table, name, parity.calendar)[:, [codes.index(entity.name) for entity in parity.entities]]


def _leg(table: Table, leg: LegColumn, calendar: Calendar, inside: np.typing.NDArray[np.bool_]) -> Leg:
    values = np.where(inside[:, None], column(table, leg.column, calendar), np.nan)
    one_step = None if leg.one_step is None else _moved_on(column(table, leg.one_step, calendar))
    return Leg(leg.name, leg.role, values, leg.weight, leg.null, one_step)


def _moved_on(outcomes: Floats) -> Floats:
    """One-period outcomes stand at their origin in the file, and here in the period in which they fall."""
    moved = np.full_like(outcomes, np.nan)
    moved[1:] = outcomes[:-1]
    return moved
