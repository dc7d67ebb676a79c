"""One index for all outcomes: exact where slopes are of rank one, the test at its size, errors against simulation."""

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.fit import fit
from carrylab.regression.sample import Floats, make_sample
from carrylab.regression.single_index import single_index
from carrylab.regression.wald import wald

COMBINATION, LOADINGS = np.array([0.4, -0.2, 0.3]), np.array([0.5, 0.8, 1.2, 1.5])


def estimate(rng: np.random.Generator, slopes: Floats, T: int = 400) -> tuple[Floats, Floats]:
    """Slopes (K, L) and influence (T, K, L) of outcomes on independent predictors with correlated errors."""
    x = rng.standard_normal((T, len(slopes)))
    errors = rng.standard_normal((T, 1)) + rng.standard_normal((T, slopes.shape[1]))
    sample = make_sample(
        x[:, None],
        (x @ slopes + errors)[:, None],
        terms=("a", "b", "c"),
        legs=("1", "2", "3", "4"),
        steps=np.ones(T),
        overlap=0,
        one_step=[None] * 4,
    )
    found = fit(sample, effects="none")
    return found.coefficients[:3], found.influence[:, :3]


def stacked(slopes: Floats, series: Floats) -> tuple[Floats, Floats]:
    return slopes.T.reshape(-1), series.transpose(0, 2, 1).reshape(len(series), -1)


def test_slopes_of_rank_one_are_found_exactly() -> None:
    series = np.random.default_rng(1).standard_normal((50, 3, 4))
    found = single_index(np.outer(COMBINATION, LOADINGS), series)
    assert found.loadings == pytest.approx(LOADINGS, rel=1e-10)
    assert found.combination == pytest.approx(COMBINATION, rel=1e-10)
    values, _ = stacked(np.outer(COMBINATION, LOADINGS), series)
    assert found.hypothesis.matrix.shape == (6, 12)
    assert found.hypothesis.matrix @ values == pytest.approx(np.zeros(6), abs=1e-12)


def test_two_by_two_by_hand() -> None:
    """Equal weights: the nearest matrix of rank one is the largest singular triple."""
    slopes = np.array([[2.0, 1.0], [1.0, 2.0]])
    found = single_index(slopes, np.ones((4, 2, 2)))
    # Largest singular value 3 with both vectors (1, 1)/sqrt 2: fit 1.5 everywhere, loadings (1, 1).
    assert np.outer(found.combination, found.loadings) == pytest.approx(np.full((2, 2), 1.5))
    assert found.loadings == pytest.approx([1.0, 1.0])


def test_the_test_holds_its_size_and_sees_a_second_index() -> None:
    rng = np.random.default_rng(2)
    second = np.outer([0.0, 0.4, 0.0], [0.6, 0.2, -0.2, -0.6])
    p_values = {"one": [], "two": []}
    loadings, errors = [], []
    for _ in range(300):
        for name, slopes in (
            ("one", np.outer(COMBINATION, LOADINGS)),
            ("two", np.outer(COMBINATION, LOADINGS) + second),
        ):
            values, series = estimate(rng, slopes)
            found = single_index(values, series)
            flat, influence = stacked(values, series)
            p_values[name].append(wald(influence, flat, found.hypothesis, kind="date").p_value)
            if name == "one":
                loadings.append(found.loadings[0])
                errors.append(np.sqrt((found.influence[:, 3] ** 2).sum()))
    assert 0.02 <= np.mean(np.array(p_values["one"]) < 0.05) <= 0.09
    assert np.mean(np.array(p_values["two"]) < 0.05) > 0.8
    assert np.std(loadings) == pytest.approx(np.mean(errors), rel=0.15)
    assert np.mean(loadings) == pytest.approx(LOADINGS[0], abs=0.02)


def test_one_outcome_is_refused() -> None:
    with pytest.raises(InferenceError, match="one index for 1 outcomes and 3 predictors tests nothing"):
        single_index(np.ones((3, 1)), np.ones((10, 3, 1)))
