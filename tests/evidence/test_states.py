"""States through a study file, against the same regressions on the dates of each state worked apart."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

import carrylab
from carrylab.errors import StudyError
from carrylab.evidence.rules import LEAST
from carrylab.results import Results

STATES = """
[[state]]
name = "slump"
file = "slump.csv"
known = false
[[state]]
name = "wide"
rule = "signal above its median"
"""


def run(folder: Path, more: str = STATES, files: dict[str, pd.DataFrame] | None = None) -> Results:
    """The world of columns with two states, the first a spell over the second and third year."""
    slump = pd.DataFrame({"from": ["2001-01"], "until": ["2002-12"]})
    given = (files or worlds.columns()) | {"slump": slump}
    return carrylab.run(carrylab.read_study(worlds.write(folder, worlds.COLUMNS + more, **given)))


def states(results: Results) -> pd.DataFrame:
    return results.findings[results.findings["section"] == "states"]


def own_slope(panel: pd.DataFrame, keep: pd.Series) -> float:
    """Within slope of the return on the signal on some rows."""
    part = panel[keep]
    x, y = (part[name] - part.groupby("entity")[name].transform("mean") for name in ("signal", "excess return"))
    return float((x * y).sum() / (x * x).sum())


def test_shares_in_a_spell_are_those_of_its_dates(tmp_path: Path) -> None:
    results = run(tmp_path)
    found, panel = states(results), results.panel()
    panel = panel.dropna()
    inside = panel["date"].between("2001-01", "2002-12")
    for label, keep in (("slump", inside), ("not slump", ~inside)):
        rows = found[found["sample"] == label]
        slope = rows[(rows["term"] == "signal") & (rows["role"] == "return")].iloc[0]
        assert slope["estimate"] == pytest.approx(own_slope(panel, keep))
        assert slope["n_obs"] == keep.sum()
        earned = rows[rows["term"] == "part of summed excess return"]["estimate"].iloc[0]
        assert earned == pytest.approx(panel.loc[keep, "excess return"].sum() / panel["excess return"].sum())
    mean = found[(found["sample"] == "slump") & (found["term"] == "mean excess return")]["estimate"].iloc[0]
    assert mean == pytest.approx(panel.loc[inside, "excess return"].mean())
    assert found[found["term"] == "equal in all states of slump"]["p_value"].between(0, 1).all()


def test_the_timeline_says_what_followed_the_start(tmp_path: Path) -> None:
    results = run(tmp_path)
    rows = results.findings[results.findings["section"] == "timeline"]
    rows = rows[rows["sample"] == "slump, 2001-01 to 2002-12"]
    start = results.panel().query("date == '2001-01'")
    assert rows[rows["term"] == "signal at start"]["estimate"].iloc[0] == pytest.approx(start["signal"].mean())
    followed = rows[rows["term"] == "what followed"].set_index("leg")["estimate"]
    assert followed["excess return"] == pytest.approx(start["excess return"].mean())
    assert rows["n_dates"].iloc[0] == 24
    taken = rows[rows["term"] == "taken by"].iloc[0]
    signed = {leg: followed[leg] * np.sign(start["signal"].mean()) for leg in followed.index}
    assert taken["leg"] == max(signed, key=lambda leg: signed[leg])


def test_a_rule_uses_only_what_was_known(tmp_path: Path) -> None:
    """The median at each date is that of the mean signals so far; later data move no earlier label."""
    panel = run(tmp_path).panel()
    signal = panel.groupby("date")["signal"].mean()
    wide = [value > np.median(signal.iloc[: t + 1]) for t, value in enumerate(signal)][LEAST - 1 :]
    rows = states(run(tmp_path))
    inside = rows[(rows["sample"] == "wide") & (rows["term"] == "signal")].iloc[0]
    known = panel.dropna()
    dates = set(signal.index[LEAST - 1 :][wide])
    assert inside["n_dates"] == known[known["date"].isin(dates)]["date"].nunique()

    moved = worlds.columns()
    late = moved["panel"]["date"] >= "2006-01"
    moved["panel"].loc[late, ["spread", "dy"]] += 100.0
    before = run(tmp_path).findings.query("section == 'timeline' and last < '2005-12'")
    after = run(tmp_path, files=moved).findings.query("section == 'timeline' and last < '2005-12'")
    pd.testing.assert_frame_equal(before.reset_index(drop=True), after.reset_index(drop=True))
    assert len(before)


@pytest.mark.parametrize(
    ("rule", "said"),
    [
        ("signal over its median", "'signal over its median' is not allowed; allowed are such as"),
        (
            "sgnal above zero",
            "no market has the series 'sgnal'; did you mean 'signal'?; allowed are signal, volatility",
        ),
        ("volatility in its top third", "no market has the series 'volatility'"),
    ],
)
def test_a_rule_that_cannot_be_is_one_line(tmp_path: Path, rule: str, said: str) -> None:
    with pytest.raises(StudyError) as refused:
        run(tmp_path, f'\n[[state]]\nname = "x"\nrule = "{rule}"\n')
    assert said in str(refused.value)
    assert len(str(refused.value).splitlines()) == 1


def test_volatility_is_that_of_the_last_year(tmp_path: Path) -> None:
    more = '\n[[state]]\nname = "stormy"\nrule = "volatility in its top third"\n'
    study = worlds.CURRENCIES + more
    found = states(carrylab.run(carrylab.read_study(worlds.write(tmp_path, study, **worlds.currencies()))))
    parts = found[found["term"] == "part of observations"].set_index("sample")["estimate"]
    assert 0.1 < parts["stormy"] < 0.6
    assert parts["stormy"] + parts["not stormy"] <= 1.0 + 1e-12


def test_the_report_shows_states_and_spells(tmp_path: Path) -> None:
    report = run(tmp_path).report()
    assert "by state" in report
    assert "spells of states and what followed" in report
    assert "dated afterwards, not known at the time" in report
