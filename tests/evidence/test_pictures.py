"""Paths and points of figures, worked by hand, and points that lie about the line of the table."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

import carrylab
from carrylab.evidence.pictures import MOST_POINTS, Picture, picture_of


def pictures(folder: Path, study: str, **files: pd.DataFrame) -> tuple[carrylab.Results, list[Picture]]:
    results = carrylab.run(carrylab.read_study(worlds.write(folder, study, **files)))
    return results, [picture_of(case) for case in results.cases]


def test_a_panel_of_two_entities_by_hand(tmp_path: Path) -> None:
    """EA: spread 0 1 2 3, EB: 10 11 12 and a hole. Entity means 1.5 and 11, grand mean 39/7.

    EB has no outcome in the last month but a spread, 15, so the mean spread of that month is (3 + 15) / 2 = 9.
    """
    dates = ["2001-01", "2001-02", "2001-03", "2001-04"]
    rows = [
        pd.DataFrame({"date": dates, "country": "EA", "spread": [0.0, 1, 2, 3], "rx": [1.0, 1, 2, 4]}),
        pd.DataFrame({"date": dates, "country": "EB", "spread": [10.0, 11, 12, 15], "rx": [5.0, 6, 5, np.nan]}),
    ]
    panel = pd.concat(rows)
    panel["dy"] = panel["spread"] - panel["rx"]
    study = worlds.COLUMNS.replace('["3m"]', '["1m"]').replace('by = "entity"', 'errors = "robust"')
    _, (found,) = pictures(tmp_path, study, panel=panel)
    np.testing.assert_allclose(found.path.signal[:4], [5, 6, 7, 9])
    assert np.isnan(found.path.signal[4:]).all()
    np.testing.assert_allclose(found.path.legs[:4, 0], [3, 3.5, 3.5, 4])
    grand = 39 / 7
    np.testing.assert_allclose(
        np.sort(found.points.signal), grand + np.sort([-1.5, -0.5, 0.5, 1.5, -1, 0, 1]), rtol=1e-12
    )
    np.testing.assert_allclose(found.points.centre[:2], [grand, 24 / 7])
    assert found.points.apart == 1


@pytest.mark.parametrize(
    ("study", "make"),
    [(worlds.BONDS, worlds.bonds), (worlds.CURRENCIES, worlds.currencies), (worlds.COLUMNS, worlds.columns)],
    ids=["bonds", "currencies", "columns"],
)
def test_points_are_apart_by_the_horizon_and_centre_on_the_line(study: str, make: object, tmp_path: Path) -> None:
    """Outcomes of dates a horizon apart do not overlap; least squares passes through the means."""
    results, found = pictures(tmp_path, study, **make())  # type: ignore[operator]
    for case, picture in zip(results.cases, found, strict=True):
        sample, estimate = case.pooled.sample, case.pooled.estimate
        assert picture.points.apart % (sample.overlap + 1) == 0
        assert len(picture.points.signal) <= MOST_POINTS
        assert picture.points.legs.shape == (len(picture.points.signal), len(picture.legs))
        const = picture.points.centre[1:] - picture.points.centre[0] * estimate.coefficients[0]
        np.testing.assert_allclose(const, estimate.coefficients[-1], atol=1e-12)


def test_all_rows_lie_about_the_slope_of_the_table(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where no date is left out, the least squares of the points is that of the table (Frisch and Waugh 1933)."""
    study = worlds.COLUMNS.replace('["3m"]', '["1m"]')
    results, (found,) = pictures(tmp_path, study, **worlds.columns())
    x = found.points.signal - found.points.signal.mean()
    slope = x @ found.points.legs[:, 0] / (x @ x)
    assert slope == pytest.approx(results.cases[0].pooled.estimate.coefficients[0, 0], rel=1e-9)


def test_a_large_panel_is_thinned_by_whole_horizons(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("carrylab.evidence.pictures.MOST_POINTS", 50)
    _, (found,) = pictures(tmp_path, worlds.COLUMNS, **worlds.columns())
    assert found.points.apart % 3 == 0
    assert found.points.apart > 3
    assert 20 < len(found.points.signal) <= 50


def test_another_predictor_is_taken_out_at_its_slope(tmp_path: Path) -> None:
    """rx = spread + 2 growth exactly: with growth out, every point lies on the line of slope one."""
    files = worlds.columns()
    rng = np.random.default_rng(5)
    growth = rng.standard_normal(len(files["panel"]))
    panel = files["panel"].assign(growth=growth)
    panel["rx"] = panel["spread"] + 2 * growth
    panel["dy"] = panel["spread"] - panel["rx"]
    study = worlds.COLUMNS.replace('signal = "spread"', 'signal = "spread", controls = ["growth"]')
    _, (found,) = pictures(tmp_path, study.replace('["3m"]', '["1m"]'), panel=panel)
    gap = found.points.legs[:, 0] - found.points.signal
    np.testing.assert_allclose(gap, gap.mean(), atol=1e-9)
