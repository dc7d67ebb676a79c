"""Agreement with linearmodels (PanelOLS) and statsmodels (OLS) on unbalanced panels with holes."""

import numpy as np
import pytest

from carrylab.audit import NO_COUNTERPART, PANEL, SERIES, audit
from carrylab.regression.covariance import ErrorOptions
from carrylab.regression.sample import Sample, make_sample, take

BAR = 1e-8


def unbalanced(seed: int, *, hole_dates: bool, overlap: int = 3, scale: float = 1.0) -> Sample:
    """Late entries, early exits, scattered holes and, if asked, whole dates missing."""
    rng = np.random.default_rng(seed)
    T, N = 60, 9
    x = scale * rng.normal(size=(T, N, 2)).cumsum(axis=0) + np.arange(N)[:, None]
    common = rng.normal(size=(T, 1, 3))
    y = x[:, :, :1] * [0.2, 0.5, -1.0] + common + rng.normal(size=(T, N, 3))
    for i in range(N):
        x[: 2 * i, i] = np.nan
    y[50:, 1] = np.nan
    x[rng.random((T, N)) < 0.1] = np.nan
    if hole_dates:
        x[[17, 30, 31]] = np.nan
    return make_sample(
        x,
        y,
        terms=["signal", "growth"],
        legs=["a", "b", "c"],
        steps=np.full(T, overlap + 1),
        overlap=overlap,
        one_step=[None] * 3,
    )


@pytest.mark.parametrize("effects", ["none", "entity", "time", "both"])
@pytest.mark.parametrize("hole_dates", [False, True])
def test_every_quantity_that_has_a_counterpart_agrees(effects, hole_dates) -> None:
    sample = unbalanced(0, hole_dates=hole_dates)
    found = audit([("panel", sample)], effects, ErrorOptions())
    largest = found.largest()
    assert max(largest.values()) < BAR
    wanted = {"slope", "const", "r2", "std_error, classical", "std_error, robust"}
    wanted |= {"std_error, clustered: entity", "std_error, clustered: date"}
    assert wanted <= {quantity for quantity, against in largest if against == PANEL}
    assert {"slope", "std_error, bartlett"} <= {quantity for quantity, against in largest if against == SERIES}
    # a calendar with holes has no counterpart where lags are counted by row, and the audit says so
    assert (("std_error, bartlett", PANEL) in largest) is not hole_dates
    assert any("counts lags by row" in text for text in found.not_compared) is hole_dates
    assert set(NO_COUNTERPART) <= set(found.not_compared)


def test_badly_scaled_data_agree_too() -> None:
    # Levels a hundred times the variation; beyond that the other code, which puts the mean back, loses digits.
    found = audit([("panel", unbalanced(1, hole_dates=False, scale=1e-2))], "entity", ErrorOptions(lags=5))
    assert max(found.largest().values()) < BAR


def test_one_series_against_both() -> None:
    one = take(unbalanced(2, hole_dates=False), [0])
    found = audit([("series", one)], "none", ErrorOptions())
    assert max(found.largest().values()) < BAR
    assert any("needs at least two clusters" in text for text in found.not_compared)


def test_a_planted_difference_is_found(monkeypatch) -> None:
    # the audit must be able to fail: let our lag be one longer than theirs
    import carrylab.audit as module

    honest = module.standard_errors

    def longer(sample, estimate, options):
        lags = None if options.lags is None else options.lags + 1
        return honest(sample, estimate, ErrorOptions(options.kind, lags, options.factor))

    monkeypatch.setattr(module, "standard_errors", longer)
    found = audit([("panel", unbalanced(0, hole_dates=False, overlap=0))], "entity", ErrorOptions(lags=2))
    assert found.largest()["std_error, bartlett", PANEL] > 1e-3
    assert found.largest()["std_error, classical", PANEL] < BAR


def test_an_exact_fit_is_listed_and_lines_are_plain() -> None:
    sample = unbalanced(3, hole_dates=False)
    holes = np.where(sample.mask[:, :, None], 1.0, np.nan)
    exact = make_sample(
        sample.x * holes,
        2.0 * sample.x[:, :, :1] * holes,
        terms=sample.terms,
        legs=["copy"],
        steps=sample.steps,
        overlap=0,
        one_step=[None],
    )
    found = audit([("copy", exact), ("panel", sample)], "entity", ErrorOptions())
    assert "not compared: copy, copy: the leg is fitted exactly, there is no error to compare" in found.lines()
    assert any(line.startswith(f"slope, 6 against {PANEL}: largest relative difference ") for line in found.lines())
