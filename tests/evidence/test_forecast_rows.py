"""Forecasts through a study file: rows, words, the sign restriction, and what cannot be asked."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

import carrylab
from carrylab.errors import StudyError
from carrylab.results import Results

ASKED = '[evidence]\nforecast = { first = "48m", rolling = "48m", risk_aversion = 4 }\n'


def run(folder: Path, more: str = ASKED) -> Results:
    return carrylab.run(carrylab.read_study(worlds.write(folder, worlds.COLUMNS + more, **worlds.columns())))


def rows(results: Results, scheme: str = "recursive", role: str = "return") -> pd.DataFrame:
    found = results.findings
    keep = (found["section"] == "forecast") & (found["sample"] == scheme) & (found["role"] == role)
    return found[keep & (found["group"] == "pooled")].set_index("term")


def panel_of(results: Results) -> dict[str, pd.DataFrame]:
    panel = results.panel()
    return {
        name: panel.pivot_table(index="date", columns="entity", values=name) for name in ("signal", "excess return")
    }


def test_r2_is_that_of_a_plain_loop_through_the_panel(tmp_path: Path) -> None:
    """Three months ahead: at t rows to t - 3 train; entity means out, one slope for all."""
    results = run(tmp_path)
    x, y = (panel_of(results)[name].to_numpy() for name in ("signal", "excess return"))
    errors, others, signed = [], [], []
    for t in range(48, len(x)):
        known_x, known_y = x[: t - 2], y[: t - 2]
        u, v = known_x - known_x.mean(axis=0), known_y - known_y.mean(axis=0)
        slope = (u * v).sum() / (u * u).sum()
        mean = known_y.mean(axis=0)
        model = mean + slope * (x[t] - known_x.mean(axis=0))
        held = np.maximum(model if slope >= 0 else mean, 0.0)
        errors.append((y[t] - model) ** 2)
        others.append((y[t] - mean) ** 2)
        signed.append((y[t] - held) ** 2)
    found = rows(results)["estimate"]
    assert found["R2 against the historical mean"] == pytest.approx(1 - np.sum(errors) / np.sum(others))
    zero = np.sum(y[48:] ** 2)
    assert found["R2 against the parity's own forecast"] == pytest.approx(1 - np.sum(errors) / zero)
    restricted = found["R2 against the historical mean, sign restricted"]
    assert restricted == pytest.approx(1 - np.sum(signed) / np.sum(others))
    last = found[[term for term in found.index if term.startswith("running difference")]].iloc[-1]
    assert last == pytest.approx(np.sum(np.mean(others, axis=1) - np.mean(errors, axis=1)))


def test_the_fundamental_is_held_against_one_for_one(tmp_path: Path) -> None:
    """Errors of the two legs mirror each other, so the model does as well against the parity in both."""
    results = run(tmp_path)
    paid, true = (rows(results, role=role)["estimate"] for role in ("return", "fundamental"))
    term = "R2 against the parity's own forecast"
    assert paid[term] == pytest.approx(true[term])


def test_a_rolling_window_forgets(tmp_path: Path) -> None:
    results = run(tmp_path)
    x, y = (panel_of(results)[name].to_numpy() for name in ("signal", "excess return"))
    errors, others = [], []
    for t in range(48, len(x)):
        stop = t - 2
        known_x, known_y = x[max(stop - 48, 0) : stop], y[max(stop - 48, 0) : stop]
        u, v = known_x - known_x.mean(axis=0), known_y - known_y.mean(axis=0)
        slope = (u * v).sum() / (u * u).sum()
        errors.append((y[t] - known_y.mean(axis=0) - slope * (x[t] - known_x.mean(axis=0))) ** 2)
        others.append((y[t] - known_y.mean(axis=0)) ** 2)
    found = rows(results, "rolling")["estimate"]
    assert found["R2 against the historical mean"] == pytest.approx(1 - np.sum(errors) / np.sum(others))


def test_the_report_warns_of_luck_and_costs(tmp_path: Path) -> None:
    report = " ".join(run(tmp_path).report().split())
    assert "out of sample" in report
    assert "positive in about one sample in four" in report
    assert "before costs, margin and tax" in report
    assert "risk aversion 4" in report


def test_a_first_sample_longer_than_the_data_is_one_line(tmp_path: Path) -> None:
    with pytest.raises(StudyError, match=r"key first: '240m' leaves no origin of market 'Own'.*from 2000-01 to"):
        run(tmp_path, '[evidence]\nforecast = { first = "240m" }\n')


def test_time_effects_are_refused_in_words(tmp_path: Path) -> None:
    text = worlds.COLUMNS.replace('by = "entity"', 'effects = "time"') + ASKED
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, text, **worlds.columns())))
    found = results.findings[results.findings["section"] == "forecast"]
    assert found["note"].str.contains("time effects of a date are not known before it").all()
