"""Signals and legs the user has already built, each row standing at its origin date."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd

from carrylab.data.calendar import Calendar, Floats, Tenor, add, make_calendar, ordinal, window
from carrylab.data.read import MarketData, Table
from carrylab.errors import StudyError
from carrylab.markets.parity import Entity, Leg, Parity
from carrylab.options import LegColumn, PanelColumns

TOLERANCE = 1e-8


def parities(data: MarketData, economies: Mapping[str, str]) -> list[Parity]:
    """One parity a horizon; the horizon says how far the legs reach, hence how they overlap."""
    columns = data.market.panel
    if columns is None:
        raise StudyError(f"market {data.market.name!r}: a columns market needs a panel")
    (table,) = data.tables["panel"]
    calendars = {horizon: _reaching(data.calendar, horizon) for horizon in data.market.horizons}
    codes = _codes(table)
    entities = tuple(Entity(code, code, economies.get(code, "")) for code in codes)
    return [
        Parity(
            market=data.market.name,
            name="columns",
            horizon=horizon,
            calendar=calendars[horizon],
            window=window(calendars[horizon], horizon, data.market.max_gap),
            entities=entities,
            signal_name=columns.signal,
            signal=column(table, columns.signal, calendars[horizon]),
            legs=_legs(table, columns, calendars[horizon]),
            tolerance=data.market.tolerance or TOLERANCE,
        )
        for horizon in data.market.horizons
    ]


def _reaching(calendar: Calendar, horizon: Tenor) -> Calendar:
    """The calendar with the periods in which the last origins' outcomes fall; days are only those observed."""
    if calendar.interval == "day":
        return calendar
    end = ordinal(add(calendar.days[-1:], horizon), calendar.interval)
    return make_calendar(calendar.interval, np.concatenate([calendar.ordinals, end]))


def _codes(table: Table) -> list[str]:
    return sorted(map(str, table.frame["entity"].unique())) if "entity" in table.keys else ["all"]


def column(table: Table, name: str, calendar: Calendar) -> Floats:
    """One named column of a panel, dense (T, N)."""
    frame, codes = table.frame, _codes(table)
    found = np.full((len(calendar), len(codes)), np.nan)
    at = _place(frame, codes) if "entity" in table.keys else np.zeros(len(frame), dtype=np.int64)
    found[calendar.locate(frame["ordinal"].to_numpy()), at] = frame[name].to_numpy()
    return found


def predictor(table: Table, name: str, parity: Parity) -> Floats:
    """One named column of a panel for the entities of its parity (T, N)."""
    codes = _codes(table)
    return column(table, name, parity.calendar)[:, [codes.index(entity.name) for entity in parity.entities]]


def _place(frame: pd.DataFrame, codes: list[str]) -> np.typing.NDArray[np.int64]:
    return np.array([codes.index(str(code)) for code in frame["entity"]], dtype=np.int64)


def _legs(table: Table, columns: PanelColumns, calendar: Calendar) -> tuple[Leg, ...]:
    return tuple(_leg(table, leg, calendar) for leg in columns.legs)


def _leg(table: Table, leg: LegColumn, calendar: Calendar) -> Leg:
    one_step = None if leg.one_step is None else _moved_on(column(table, leg.one_step, calendar))
    return Leg(leg.name, leg.role, column(table, leg.column, calendar), leg.weight, leg.null, one_step)


def _moved_on(outcomes: Floats) -> Floats:
    """One-period outcomes stand at their origin in the file, and here in the period in which they fall."""
    moved = np.full_like(outcomes, np.nan)
    moved[1:] = outcomes[:-1]
    return moved
