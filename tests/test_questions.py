"""The further questions of a study file: each mistake is one line, and every key becomes one value."""

from pathlib import Path

import pytest

from carrylab.data.calendar import parse_tenor
from carrylab.errors import StudyError
from carrylab.options import Breaks, Forecast, Period, Profile, Windows
from carrylab.study import read_study

STUDY = """
interval = "month"
horizons = ["1m"]
[[market]]
name = "own"
kind = "columns"
[market.data]
panel = {{ file = "panel.csv", entity = "who", signal = "x", legs = [ {{ name = "y", column = "y" }} ] }}
{more}
"""


def written(folder: Path, more: str) -> Path:
    path = folder / "study.toml"
    path.write_text(STUDY.format(more=more), encoding="utf-8")
    return path


def test_every_question_becomes_one_value(tmp_path: Path) -> None:
    more = """
    [evidence]
    horizons = { until = "60m", common_sample = true }
    windows = { rolling = "120m", every = "12m" }
    breaks = {}
    forecast = { first = "10y" }
    years = true
    [[state]]
    name = "recession"
    file = "recessions.csv"
    known = false
    [[period]]
    name = "late"
    from = "2010-01"
    """
    asked = read_study(written(tmp_path, more)).questions
    assert asked.horizons == Profile(parse_tenor("60m"), common_sample=True)
    assert asked.windows == Windows(rolling=parse_tenor("120m"), every=parse_tenor("12m"))
    assert asked.breaks == Breaks(trim=0.15)
    assert asked.forecast == Forecast(first=parse_tenor("120m"), risk_aversion=3.0)
    assert asked.years
    assert not asked.parts
    assert asked.periods == (Period("late", "2010-01", None),)
    (state,) = asked.states
    assert not state.known
    assert state.source is not None
    assert state.source.path == tmp_path / "recessions.csv"


@pytest.mark.parametrize(
    ("more", "said"),
    [
        ("[evidence]\nhorizons = {}", "[evidence], horizons: the key until is missing"),
        ("[evidence]\nwindows = {}", "[evidence], windows: name a length"),
        ("[evidence]\nbreaks = { trim = 0.7 }", "[evidence], breaks, key trim: 0.7 is not allowed"),
        ("[evidence]\nyears = 3", "[evidence], key years: 3 is not allowed; allowed: true, false"),
        ("[evidence]\nwindow = {}", "did you mean 'windows'?"),
        ('[[state]]\nname = "a"', "[[state]] number 1: give either file or rule"),
        ('[[period]]\nname = "a"', "[[period]] number 1: give from, until or both"),
        ('[[period]]\nname = "a"\nfrom = "2000"\n[[period]]\nname = "a"\nfrom = "2001"', "'a' is used twice"),
        ('[state]\nname = "a"', "[[state]]: {'name': 'a'} is not allowed; allowed are tables in double brackets"),
    ],
)
def test_a_mistake_is_one_line(tmp_path: Path, more: str, said: str) -> None:
    with pytest.raises(StudyError) as refused:
        read_study(written(tmp_path, more))
    assert said in str(refused.value)
    assert len(str(refused.value).splitlines()) == 1
