"""Fitted values: equal to the regression's own, with the textbook error of a prediction's mean."""

import numpy as np
import pytest

from carrylab.regression.fit import fit
from carrylab.regression.fitted import fitted
from carrylab.regression.sample import Sample, make_sample


def panel(N: int) -> Sample:
    rng = np.random.default_rng(3)
    x = rng.normal(size=(40, N, 1))
    y = 0.5 * x + rng.normal(size=(40, N, 1)) + np.arange(N)[:, None]
    y[3, 0] = np.nan
    return make_sample(
        x, y, terms=("signal",), legs=("return",), steps=np.ones(40, dtype=np.int64), overlap=0, one_step=(None,)
    )


def test_one_series_matches_the_textbook_error() -> None:
    sample = panel(1)
    estimate = fit(sample, effects="none")
    found = fitted(sample, estimate, 0, np.array([[2.0]]))
    X = np.column_stack([sample.x[:, 0, 0], np.ones(40)])[sample.mask[:, 0]]
    y = sample.y[sample.mask[:, 0], 0, 0]
    b = np.linalg.lstsq(X, y, rcond=None)[0]
    e, at, bread = y - X @ b, np.array([2.0, 1.0]), np.linalg.inv(X.T @ X)
    white = at @ bread @ (X.T * e**2) @ X @ bread @ at
    assert found.values[0] == pytest.approx(at @ b, rel=1e-12)
    assert (found.influence**2).sum() == pytest.approx(white, rel=1e-10)


def test_entity_effects_give_each_entity_its_own_level() -> None:
    sample = panel(3)
    estimate = fit(sample, effects="entity")
    terms = np.array([[0.0], [1.0], [-1.0]])
    found = fitted(sample, estimate, 0, terms)
    for i in range(3):
        rows = sample.mask[:, i]
        level = sample.y[rows, i, 0].mean() - estimate.coefficients[0, 0] * sample.x[rows, i, 0].mean()
        assert found.values[i] == pytest.approx(level + estimate.coefficients[0, 0] * terms[i, 0])
    assert found.influence.sum(axis=0) == pytest.approx(np.zeros(3), abs=1e-12)
