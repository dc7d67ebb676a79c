"""The rest of the curve: components and forward rates by hand, R2 against least squares worked apart."""

from pathlib import Path

import numpy as np
import pytest
import worlds

import carrylab
from carrylab.evidence.curve import forward_rates, principal_components


def test_forward_rates_by_hand() -> None:
    # One year at 2%, two at 3%, four at 4%: (6 - 2) / 1 = 4%, (16 - 6) / 2 = 5%.
    found = forward_rates(np.array([[[0.02, 0.03, 0.04]]]), np.array([1.0, 2.0, 4.0]))
    assert found[0, 0] == pytest.approx([0.02, 0.04, 0.05])


def test_components_are_those_of_a_singular_value_decomposition() -> None:
    rng = np.random.default_rng(1)
    yields = rng.standard_normal((60, 2, 1)) + 0.2 * rng.standard_normal((60, 2, 4))
    yields[5, 1, 2] = np.nan
    found, shares = principal_components(yields, 2)
    rows = np.isfinite(yields).all(axis=2)
    centred = np.concatenate([yields[rows[:, e], e] - yields[rows[:, e], e].mean(axis=0) for e in range(2)])
    _, s, v = np.linalg.svd(centred, full_matrices=False)
    assert shares == pytest.approx((s**2 / (s**2).sum())[:2])
    ours = np.concatenate([found[rows[:, e], e] for e in range(2)])
    assert np.abs(ours) == pytest.approx(np.abs(centred @ v[:2].T))
    assert not np.isfinite(found[5, 1]).any()


def test_rows_of_the_curve_against_least_squares(tmp_path: Path) -> None:
    study = worlds.BONDS.replace('["forward-spot", "yield-spread", "carry"]', '["forward-spot"]')
    study += "[evidence]\ncomponents = 2\n"
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, study, **worlds.bonds())))
    found = results.findings[results.findings["section"] == "curve"]
    found = found[found["parity"] == "forward-spot"]
    panel = results.panel().query("parity == 'forward-spot'").dropna()
    panel["economy"] = panel["entity"].str.split(" ").str[0]
    panel["maturity"] = panel["entity"].str.split(" ").str[1]
    raw = worlds.bonds()["yields"].pivot_table(index=["date", "economy"], columns="maturity", values="value")
    logs = np.log1p(raw / 100)
    logs = logs.reset_index()
    logs["date"] = logs["date"].str[:7]
    for maturity in ("2y", "3y"):
        own = panel[panel["maturity"] == maturity].merge(logs, on=["date", "economy"])
        y = own["excess return"] - own.groupby("economy")["excess return"].transform("mean")
        forwards = own[["1y", "2y", "3y"]]
        x = forwards - own.groupby("economy")[["1y", "2y", "3y"]].transform("mean")
        fit = x.to_numpy() @ np.linalg.lstsq(x.to_numpy(), y.to_numpy(), rcond=None)[0]
        rows = found[found["group"] == maturity].set_index("term")["estimate"]
        assert rows["R2 of all forward rates"] == pytest.approx((fit**2).sum() / (y**2).sum(), abs=1e-9)
        signal = own["signal"] - own.groupby("economy")["signal"].transform("mean")
        alone = (signal @ y) ** 2 / (signal @ signal) / (y @ y)
        assert rows["R2 of the signal alone"] == pytest.approx(alone, abs=1e-9)
        # Two components and the signal span the three yields.
        assert rows["R2 of the signal alone"] + rows["R2 added"] <= rows["R2 of all forward rates"] + 1e-9
    loadings = found[found["term"] == "loading on one combination"]["estimate"]
    assert loadings.mean() == pytest.approx(1.0)
    assert found[found["term"] == "one combination for all maturities"]["p_value"].between(0, 1).all()
    assert "the rest of the curve" in results.report()


def test_other_markets_have_no_curve(tmp_path: Path) -> None:
    study = worlds.CURRENCIES + "[evidence]\ncomponents = 2\n"
    found = carrylab.run(carrylab.read_study(worlds.write(tmp_path, study, **worlds.currencies()))).findings
    assert not (found["section"] == "curve").any()
