"""Signals and legs of one's own: rows stand at their origin, and the horizon says how far the legs reach."""

import math
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from markets_built import built, market, one, table

from carrylab.errors import StudyError
from carrylab.markets.columns import predictor
from carrylab.options import LegColumn, PanelColumns

LEGS = (
    LegColumn("excess return", "rx", 1.0, 0.0, "return", one_step="month"),
    LegColumn("rate rise", "dy", 1.0, 1.0, "fundamental"),
)


def panel(columns: dict[str, list[float]], entities: tuple[str, ...] = ("EA",), interval: str = "month"):
    """Every entity has the same columns, times 1, 2, ..."""
    first = table("panel", "entity", {(code,): [1.0] * len(columns["spread"]) for code in entities}, interval=interval)
    frame = first.frame.drop(columns="value")
    times = np.repeat(np.arange(1.0, len(entities) + 1), len(columns["spread"]))
    values = {name: np.tile(column, len(entities)) * times for name, column in columns.items()}
    return replace(first, frame=pd.concat([frame, pd.DataFrame(values)], axis=1))


COLUMNS = {
    "spread": [0.03, 0.02, 0.01, 0.04],
    "rx": [0.02, -0.01, 0.03, 0.01],
    "dy": [0.01, 0.03, -0.02, 0.03],
    "month": [0.1, 0.2, 0.3, 0.4],
    "growth": [5.0, 6.0, 7.0, math.nan],
}


def own(columns=COLUMNS, legs=LEGS, entities=("EA",), interval="month", **options):
    options = {"horizons": "2m", **options}
    declared = PanelColumns("entity", "spread", legs, ("growth",))
    return market(
        "columns", "columns", panel(columns, entities, interval), interval=interval, panel=declared, **options
    )


def test_rows_stand_at_their_origin() -> None:
    parity = one(own())
    # The calendar reaches two months beyond the last origin, for the last outcome.
    assert [parity.calendar.label(t) for t in (0, 5)] == ["2000-01", "2000-06"]
    np.testing.assert_array_equal(parity.signal[:, 0], [0.03, 0.02, 0.01, 0.04, math.nan, math.nan])
    np.testing.assert_array_equal(parity.legs[0].values[:4, 0], COLUMNS["rx"])
    np.testing.assert_array_equal(parity.window.ends, [2, 3, 4, 5, -1, -1])
    assert parity.window.overlap == 1
    assert parity.signal_name == "spread"
    assert [(leg.name, leg.role, leg.weight, leg.null) for leg in parity.legs] == [
        ("excess return", "return", 1.0, 0.0),
        ("rate rise", "fundamental", 1.0, 1.0),
    ]


def test_a_one_period_outcome_moves_to_the_period_in_which_it_falls() -> None:
    parity = one(own())
    np.testing.assert_array_equal(parity.legs[0].one_step[:, 0], [math.nan, 0.1, 0.2, 0.3, 0.4, math.nan])
    assert parity.legs[1].one_step is None


def test_until_bounds_outcomes_too() -> None:
    parity = one(own(last="2000-04"))
    # Origins January and February reach to March and April; those of March and April lie beyond.
    np.testing.assert_array_equal(np.isfinite(parity.legs[0].values[:4, 0]), [True, True, False, False])
    assert np.isfinite(parity.signal[:4]).all()


def test_entities_are_sorted_and_keep_their_columns() -> None:
    parity = one(own(entities=("EB", "EA")))
    assert [(entity.name, entity.currency) for entity in parity.entities] == [("EA", "AAA"), ("EB", "BBB")]
    np.testing.assert_allclose(parity.signal[0], [0.06, 0.03])


def test_a_panel_predictor_stands_beside_its_entities() -> None:
    data = own(entities=("EB", "EA"))
    parity = one(data)
    (found,) = data.tables["panel"]
    np.testing.assert_array_equal(predictor(found, "growth", parity)[:4], [[10, 5], [12, 6], [14, 7], [math.nan] * 2])


@pytest.mark.parametrize(("given", "used"), [(None, 1e-8), (0.5, 0.5), (0.0, 0.0)])
def test_the_tolerance_of_the_identity(given: float | None, used: float) -> None:
    assert one(own(tolerance=given)).tolerance == used


def test_one_parity_a_horizon() -> None:
    short, long = built(own(horizons="1m 3m"))
    assert (short.window.overlap, long.window.overlap) == (0, 2)
    assert (len(short.calendar), len(long.calendar)) == (5, 7)


def test_days_beyond_the_last_observed_are_unknown() -> None:
    parity = one(own(interval="day", horizons="2d"))
    assert len(parity.calendar) == 4
    np.testing.assert_array_equal(parity.window.ends, [2, 3, -1, -1])


def test_a_market_without_panel_columns() -> None:
    data = market("columns", "columns", panel(COLUMNS), horizons="2m")
    with pytest.raises(StudyError, match="a columns market needs a panel"):
        built(data)
