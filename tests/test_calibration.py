"""What a study's tests are worth: recovered in worlds of known size, on the command line, and what is refused."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds
from click.testing import CliRunner, Result

import carrylab
import carrylab.calibration
from carrylab import cli
from carrylab.evidence.calibrated import ORDER
from carrylab.findings import COLUMNS

RUNS = 400  # Monte Carlo error at 5%: 1.1 points
OWN = """
interval = "month"
[[market]]
name = "Own"
kind = "columns"
horizons = ["12m"]
[market.data]
panel = { file = "panel.csv", entity = "country", signal = "spread", legs = [
  { name = "excess return", column = "rx", weight = 1, null = 0, role = "return", one_step = "one" },
  { name = "rest", column = "rest", weight = 1, null = 1, role = "fundamental" } ] }
"""


def world(
    folder: Path, *, dates: int, entities: int, phi: float, delta: float, seed: int = 1, holes: float = 0
) -> Path:
    """A study of its own columns: a persistent signal, and returns over a year that it does not predict.

    Shocks to signal and return correlate `delta`, both .6 across entities.
    """
    rng = np.random.default_rng(seed)
    across = 0.6 if entities > 1 else 0.0
    common = rng.standard_normal((2, dates, 1)) * across**0.5
    v, rest = common + rng.standard_normal((2, dates, entities)) * (1 - across) ** 0.5
    one, x = delta * v + (1 - delta**2) ** 0.5 * rest, v / (1 - phi**2) ** 0.5
    for t in range(1, dates):
        x[t] = phi * x[t - 1] + v[t]
    total = np.vstack([np.cumsum(one, axis=0), np.full((12, entities), np.nan)])
    rx = total[12 : dates + 12] - total[:dates]
    x[rng.random(x.shape) < holes] = np.nan
    x[: dates // 3 if holes else 0, -1] = np.nan
    ahead = np.vstack([one[1:], np.full((1, entities), np.nan)])  # rows stand at their origin
    days = [str(month.end_time.date()) for month in pd.period_range("1980-01", periods=dates, freq="M")]
    frames = [
        pd.DataFrame({"date": days, "country": f"E{i}", "spread": x[:, i], "rx": rx[:, i], "one": ahead[:, i]})
        for i in range(entities)
    ]
    panel = pd.concat(frames)
    return worlds.write(folder, OWN, panel=panel.assign(rest=panel["spread"] - panel["rx"]))


def rates(found: carrylab.calibration.Calibration, what: str) -> dict[str, float]:
    """One number of every kind of errors."""
    rows = found.findings[found.findings["term"].str.startswith(f"{what}: ")]
    return {str(row["term"]).removeprefix(f"{what}: "): float(row["estimate"]) for row in rows.to_dict("records")}


@pytest.fixture(scope="module")
def exogenous(tmp_path_factory: pytest.TempPathFactory) -> carrylab.calibration.Calibration:
    """Ten entities whose signal says nothing of returns and hears nothing of them, as of currencies."""
    path = world(tmp_path_factory.mktemp("own"), dates=240, entities=10, phi=0.97, delta=0.0)
    return carrylab.calibrate(carrylab.read_study(path), runs=RUNS)


@pytest.fixture(scope="module")
def endogenous(tmp_path_factory: pytest.TempPathFactory) -> carrylab.calibration.Calibration:
    """Fifteen entities whose signal falls when returns are high, as a dividend yield does."""
    path = world(tmp_path_factory.mktemp("own"), dates=240, entities=15, phi=0.985, delta=-0.9)
    return carrylab.calibrate(carrylab.read_study(path), runs=RUNS)


def test_an_exogenous_world_one_period_holds_and_kernels_and_clusters_do_not(
    exogenous: carrylab.calibration.Calibration,
) -> None:
    """The table of true sizes in the contributor's guide has 5.9, 1.8, 16.0 and 26.7% for such a world."""
    size = rates(exogenous, "size")
    assert set(size) == {"auto", *ORDER}
    assert 0.02 < size["one-period"] < 0.09
    assert size["instrument"] < 0.06
    assert 0.10 < size["bartlett"] < 0.24
    assert size["clustered: entity"] > 0.15
    assert size["clustered: date"] > 0.4
    assert size["auto"] < 0.09


def test_an_endogenous_world_the_instrument_holds_and_one_period_does_not(
    endogenous: carrylab.calibration.Calibration,
) -> None:
    """The same table has 26.7, 6.3 and 50.1% for such a world."""
    size = rates(endogenous, "size")
    assert 0.15 < size["one-period"] < 0.5
    assert 0.02 < size["instrument"] < 0.11
    assert size["bartlett"] > 0.35
    assert size["clustered: entity"] > 0.5
    assert size["auto"] < size["one-period"]


def test_power_rises_with_the_share_and_the_smallest_share_agrees_with_it(
    exogenous: carrylab.calibration.Calibration,
) -> None:
    size, half, full = (rates(exogenous, what) for what in ("size", "power, half premium", "power, full premium"))
    smallest, nominal = rates(exogenous, "smallest share"), rates(exogenous, "smallest share, nominal")
    for kind in ORDER:
        assert size[kind] <= half[kind] <= full[kind]
        for share, power in ((0.5, half[kind]), (1.0, full[kind])):
            assert (power >= 0.8) == (nominal[kind] <= share)
        assert smallest[kind] >= nominal[kind]
    assert nominal["bartlett"] < smallest["bartlett"]
    assert nominal["instrument"] == smallest["instrument"]


def test_intervals_cover_where_the_size_holds(exogenous: carrylab.calibration.Calibration) -> None:
    for what in ("coverage, half premium", "coverage, full premium"):
        covered = rates(exogenous, what)
        assert 0.90 < covered["one-period"] <= 1
        assert covered["instrument"] > 0.92
        assert covered["bartlett"] < 0.92
        assert covered["auto"] == covered["one-period"]


def test_the_findings_keep_their_columns_and_say_how_sure_they_are(
    exogenous: carrylab.calibration.Calibration,
) -> None:
    found = exogenous.findings
    assert list(found.columns) == list(COLUMNS)
    assert set(found["section"]) == {"calibration"}
    size = found[found["term"] == "size: bartlett"].iloc[0]
    assert size["std_error"] == pytest.approx(math.sqrt(size["estimate"] * (1 - size["estimate"]) / RUNS))
    assert (size["lags"], size["null"], size["share"]) == (11, 0.05, 0.0)
    ranks = found[found["rank"] != ""].set_index("rank")["term"]
    assert set(ranks["headline"]) >= {"size: one-period"}
    assert "size: instrument" in set(ranks["second opinion"])
    forced = found[found["term"] == "size: robust"].iloc[0]
    assert forced["note"] == "ignores an overlap of 11 periods"


def test_the_report_says_a_false_five_percent_in_words(exogenous: carrylab.calibration.Calibration) -> None:
    size, report = rates(exogenous, "size"), exogenous.report(100)
    text = " ".join(report.split())
    assert f"A nominal 5% test by bartlett, lag 11 really rejects {size['bartlett']:.0%} of true nulls here" in text
    assert f"clustered: date {size['clustered: date']:.0%}" in text
    assert "400 samples in which nothing is paid" in text
    assert "one-period (headline)" in text
    assert max(map(len, report.splitlines())) <= 100
    assert repr(exogenous) == report


def test_the_same_seed_gives_the_same_numbers(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    study = carrylab.read_study(worlds.write(tmp_path, worlds.CURRENCIES, **worlds.currencies()))
    found = carrylab.calibrate(study, runs=100, seed=3)
    monkeypatch.setattr(carrylab.calibration, "WORKERS", 5)
    pd.testing.assert_frame_equal(found.findings, carrylab.calibrate(study, runs=100, seed=3).findings)
    other, wild = carrylab.calibrate(study, runs=100, seed=4), carrylab.calibrate(study, runs=100, seed=3, wild=True)
    assert not found.findings.equals(other.findings)
    assert not found.findings.equals(wild.findings)
    assert "one random sign a date" in " ".join(wild.report().split())


def test_an_unbalanced_panel_with_holes(tmp_path: Path) -> None:
    path = world(tmp_path, dates=240, entities=6, phi=0.95, delta=0.0, holes=0.05)
    size = rates(carrylab.calibrate(carrylab.read_study(path), runs=RUNS), "size")
    assert 0.015 < size["one-period"] < 0.09
    assert size["bartlett"] > 0.08


def test_a_leg_without_one_period_outcomes_is_a_moving_average_and_says_so(tmp_path: Path) -> None:
    found = carrylab.calibrate(
        carrylab.read_study(worlds.write(tmp_path, worlds.COLUMNS, **worlds.columns())), runs=RUNS
    )
    size, text = rates(found, "size"), " ".join(found.report().split())
    assert math.isnan(size["one-period"])
    assert 0.02 < size["cosine"] < 0.12
    assert size["bartlett"] > 0.06
    assert "a moving average of news over 3 periods" in text
    assert 'Not counted, instrument: errors = "instrument" needs one-period outcomes' in text


def test_equities_take_half_and_full_of_what_is_not_carried_over(tmp_path: Path) -> None:
    study = carrylab.read_study(worlds.write(tmp_path, worlds.EQUITIES, **worlds.equities()))
    found = carrylab.calibrate(study, runs=100)
    rows = found.findings[found.findings["parity"] == "dividend-price"].set_index("term")
    carried = rows.loc["carried over", "estimate"]
    assert 0.3 < carried < 1
    assert rows.loc["power, full premium: cosine", "share"] == pytest.approx(1 - carried)
    assert rows.loc["power, half premium: cosine", "share"] == pytest.approx((1 - carried) / 2)
    assert "is carried over to the horizon in these samples" in " ".join(found.report().split())


def bonds(noise: float = 0.0002, step: int = 1, longest: int = 36) -> dict[str, pd.DataFrame]:
    """Zero yields of two economies under the expectations hypothesis, in percent, every `step` months."""
    rng, rows = np.random.default_rng(8), []
    for economy in ("EA", "EB"):
        fast, slow = worlds.walk(rng, 0.0, 0.3, 0.9), worlds.walk(rng, 4.0, 0.3, 0.98)
        for n in range(step, longest + 1, step):
            curve = fast * (1 - 0.9**n) / (n * 0.1) + 4 + (slow - 4) * (1 - 0.98**n) / (n * 0.02)
            value = curve + 100 * noise * rng.standard_normal(len(curve))
            rows.append(pd.DataFrame({"date": worlds.DATES, "economy": economy, "maturity": f"{n}m", "value": value}))
    return {"yields": pd.concat(rows)}


def calibrated_bonds(folder: Path, files: dict[str, pd.DataFrame], **changes: str) -> carrylab.calibration.Calibration:
    text = worlds.BONDS
    for old, new in changes.items():
        text = text.replace(
            *{"maturities": ('["2y", "3y"]', new), "parities": ('["forward-spot", "yield-spread", "carry"]', new)}[old]
        )
    return carrylab.calibrate(carrylab.read_study(worlds.write(folder, text, **files)), runs=100)


def test_bonds_are_simulated_as_whole_curves(tmp_path: Path) -> None:
    found = calibrated_bonds(tmp_path, bonds())
    text = " ".join(found.report().split())
    assert "whole curves under the expectations hypothesis, three roots an economy" in text
    rows = found.findings.set_index(["parity", "term"])
    assert set(found.findings["parity"]) == {"forward-spot", "yield-spread", "carry"}
    assert rows.loc[("carry", "same regression"), "note"] == "as forward-spot, 12m"
    assert rows.loc[("carry", "size: cosine"), "estimate"] == rows.loc[("forward-spot", "size: cosine"), "estimate"]
    assert rows.loc[("forward-spot", "size: one-period"), "estimate"] < 0.25
    assert "EA 0." in rows.loc[("forward-spot", "samples"), "note"]


def test_bonds_whose_curves_cannot_be_simulated_say_why(tmp_path: Path) -> None:
    (tmp_path / "a").mkdir()
    found = calibrated_bonds(tmp_path / "a", bonds(noise=0.003))
    text = " ".join(found.report().split())
    assert "one-period outcomes by origin and step" in text
    assert "three factors miss its yields by" in text
    (tmp_path / "b").mkdir()
    few = calibrated_bonds(tmp_path / "b", worlds.bonds())
    text = " ".join(few.report().split())
    assert "draws of a curve need four maturities or more" in text
    assert "a moving average of news over 12 periods" in text


def test_draws_are_made_in_full_inside_every_sample(tmp_path: Path) -> None:
    """Full draws hold where least squares with 1B does not; there is no smallest share of theirs."""
    path = world(tmp_path, dates=120, entities=2, phi=0.98, delta=-0.9, seed=3)
    found = carrylab.calibrate(carrylab.read_study(path), runs=100, draws=99)
    size = rates(found, "size")
    assert size["draws"] < 0.13
    assert size["draws"] < size["one-period"]
    rows = found.findings.set_index("term")
    assert "99 draws in each of 100 samples" in rows.loc["size: draws", "method"]
    assert rates(found, "power, full premium")["draws"] >= rates(found, "power, half premium")["draws"]
    assert "draws" not in rates(found, "smallest share")


def test_draws_of_whole_curves_inside_every_sample(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("carrylab.evidence.calibrated_draws.MOST_RUNS", 30)
    text = worlds.BONDS.replace('["forward-spot", "yield-spread", "carry"]', '["forward-spot"]')
    study = carrylab.read_study(worlds.write(tmp_path, text, **bonds(step=6)))
    row = carrylab.calibrate(study, runs=100, draws=99).findings.set_index("term").loc["size: draws"]
    assert row["estimate"] <= 0.2 or "gave no draws" in row["note"]
    assert "of 99 draws in each of" in row["method"]


def test_a_market_without_a_return_says_so(tmp_path: Path) -> None:
    text = worlds.COLUMNS.replace(', role = "return"', "").replace(', role = "fundamental"', "")
    study = carrylab.read_study(worlds.write(tmp_path, text, **worlds.columns()))
    found = carrylab.calibrate(study, runs=100)
    assert found.findings["term"].tolist() == ["not simulated"]
    assert "no leg is a return, so there is no test that nothing is paid" in found.report()


REFUSED = [
    ({"runs": 99}, "runs = 99 is not allowed; allowed is a whole number from 100 to 1000000"),
    ({"draws": 5}, "draws = 5 is not allowed; allowed is 0 for none, or a whole number from 99 to 1000000"),
    ({"seed": -1}, "seed = -1 is not allowed; allowed is a whole number from 0 to 1000000000"),
]


@pytest.mark.parametrize(("options", "line"), REFUSED, ids=["runs", "draws", "seed"])
def test_numbers_that_cannot_be_counted_with(tmp_path: Path, options: dict[str, int], line: str) -> None:
    path = worlds.write(tmp_path, worlds.CURRENCIES, **worlds.currencies())
    with pytest.raises(carrylab.StudyError, match=line):
        carrylab.calibrate(carrylab.read_study(path), **options)
    words = [part for name, value in options.items() for part in (f"--{name}", str(value))]
    found = call(path, *words)
    assert (found.exit_code, found.stdout, found.stderr.strip()) == (2, "", line)


def call(path: Path, *words: str) -> Result:
    return CliRunner().invoke(cli.main, ["calibrate", str(path), *words])


def test_the_command_prints_the_report_and_no_progress_off_a_terminal(tmp_path: Path) -> None:
    path = worlds.write(tmp_path, worlds.CURRENCIES, **worlds.currencies())
    found = call(path, "--runs", "100", "--width", "80", "--seed", "5")
    assert found.exit_code == 0, found.output
    assert found.stderr == ""
    assert found.stdout == carrylab.calibrate(carrylab.read_study(path), runs=100, seed=5).report(80)
    assert max(map(len, found.stdout.splitlines())) <= 80


def test_progress_names_each_market(tmp_path: Path) -> None:
    said: list[str] = []
    study = carrylab.read_study(worlds.write(tmp_path, worlds.CURRENCIES, **worlds.currencies()))
    carrylab.calibrate(study, runs=100, progress=said.append)
    assert said == ["reading FX", "simulating FX, uncovered-interest 3m"]


def test_a_stop_ends_at_once(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def stopped(*_args: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("carrylab.regression.calibrated.measure", stopped)
    found = call(worlds.write(tmp_path, worlds.CURRENCIES, **worlds.currencies()))
    assert found.exit_code == 130
    assert found.stdout == ""
    assert "Stopped" in found.stderr


def test_an_entity_too_short_for_a_persistence_of_its_own_is_left_out_and_named(tmp_path: Path) -> None:
    files = worlds.currencies(codes=("BBB", "CCC", "DDD"))
    spot = files["spot"]
    files["spot"] = spot[(spot["currency"] != "DDD") | (spot["date"] >= worlds.DATES[-10])]
    found = carrylab.calibrate(carrylab.read_study(worlds.write(tmp_path, worlds.CURRENCIES, **files)), runs=100)
    assert "DDD left out, too short for a persistence of their own" in " ".join(found.report().split())
    assert 0 <= rates(found, "size")["one-period"] < 0.2
