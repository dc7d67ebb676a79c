"""Surveys of the fundamental: the parts by ordinary regressions worked apart, their sums, and what is refused."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

import carrylab
from carrylab.errors import StudyError

SURVEY = 'surveys = [ { leg = "rate rise", horizon = "3m", file = "survey.csv", unit = "percent" } ]\n'


def study(survey: str = SURVEY) -> str:
    return worlds.COLUMNS.replace("[market.data]\n", "[market.data]\n" + survey)


def survey_of(panel: pd.DataFrame, slope: float, noise: float) -> pd.DataFrame:
    """Forecasts of the rate rise in percent: a part of the spread and noise of their own."""
    rng = np.random.default_rng(1)
    value = 100 * (slope * panel["spread"] + noise * rng.standard_normal(len(panel)))
    return pd.DataFrame({"date": panel["date"], "entity": panel["country"], "value": value})


def parts(folder: Path, survey: pd.DataFrame, text: str | None = None) -> pd.DataFrame:
    files = worlds.columns() | {"survey": survey}
    results = carrylab.run(carrylab.read_study(worlds.write(folder, text or study(), **files)))
    assert "survey of rate rise" in results.report()
    found = results.findings[results.findings["section"] == "surveys"]
    return found.set_index("term")


def within(panel: pd.DataFrame, name: str) -> float:
    x, y = (panel[column] - panel.groupby("country")[column].transform("mean") for column in ("spread", name))
    return float((x * y).sum() / (x * x).sum())


def test_parts_are_ordinary_slopes_and_add_up(tmp_path: Path) -> None:
    panel = worlds.columns()["panel"]
    survey = survey_of(panel, 0.8, 0.5).iloc[:300]
    found = parts(tmp_path, survey)["estimate"]
    joined = panel.merge(survey, left_on=["date", "country"], right_on=["date", "entity"])
    joined["expected"] = joined["value"] / 100
    joined["missed"] = joined["expected"] - joined["dy"]
    joined["required"] = joined["rx"] - joined["missed"]
    for term, column in {
        "required premium": "required",
        "forecast error": "missed",
        "expected fundamental": "expected",
        "paid as excess return": "rx",
        "came true": "dy",
    }.items():
        assert found[term] == pytest.approx(within(joined, column)), term
    assert found["required premium"] + found["expected fundamental"] == pytest.approx(1.0)
    assert found["required premium"] + found["forecast error"] == pytest.approx(found["paid as excess return"])


def test_a_growth_is_taken_in_logs_and_a_weight_of_minus_one_turns_the_sign(tmp_path: Path) -> None:
    """A simple growth of 2% is ln 1.02; with weight -1 the expected part is minus its slope."""
    panel = worlds.columns()["panel"]
    panel["dy"] = -panel["dy"]
    growth = np.expm1(0.01 * panel["spread"])
    survey = pd.DataFrame({"date": panel["date"], "entity": panel["country"], "value": 100 * growth})
    text = study(SURVEY.replace('unit = "percent"', 'unit = "percent", growth = true'))
    text = text.replace('column = "dy", weight = 1, null = 1', 'column = "dy", weight = -1, null = -1')
    files = {"panel": panel, "survey": survey}
    findings = carrylab.run(carrylab.read_study(worlds.write(tmp_path, text, **files))).findings
    found = findings[findings["section"] == "surveys"].set_index("term")["estimate"]
    assert found["expected fundamental"] == pytest.approx(-0.01)
    assert found["required premium"] == pytest.approx(1.01)


@pytest.mark.parametrize(
    ("survey", "said"),
    [
        (
            SURVEY.replace("rate rise", "rate rse"),
            "no parity has the leg 'rate rse' over 3m; did you mean 'rate rise'?",
        ),
        (SURVEY.replace('"3m"', '"12m"'), "no parity has the leg 'rate rise' over 12m"),
        (SURVEY.replace(', unit = "percent"', ""), "surveys: the key unit is missing"),
        (SURVEY.replace("} ]", "}, " + SURVEY.partition("[")[2].partition("]")[0] + "]"), "stands twice"),
    ],
)
def test_a_survey_that_cannot_be_is_one_line(tmp_path: Path, survey: str, said: str) -> None:
    panel = worlds.columns()["panel"]
    files = {"panel": panel, "survey": survey_of(panel, 1.0, 0.1)}
    with pytest.raises(StudyError) as refused:
        carrylab.run(carrylab.read_study(worlds.write(tmp_path, study(survey), **files)))
    assert said in str(refused.value)
    assert len(str(refused.value).splitlines()) == 1
