"""One combination of several predictors for several outcomes: its weights, the loadings, and what tests it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import null_space

from carrylab.errors import InferenceError
from carrylab.regression.sample import Floats
from carrylab.regression.wald import Restrictions, restrictions

STEPS, SETTLED = 1000, 1e-13


@dataclass(frozen=True, eq=False, slots=True)
class SingleIndex:
    """The rank-one fit b_kl = combination_k x loading_l of slopes (K, L).

    `combination` (K,), `loadings` (L,), whose mean is one; `influence` (T, K + L) of both. `hypothesis`: the
    (K - 1)(L - 1) linear restrictions on the stacked slopes (predictor k, outcome l at l K + k) that say, around the
    fit, that the slopes are of rank one.
    """

    combination: Floats
    loadings: Floats
    influence: Floats
    hypothesis: Restrictions


def single_index(slopes: Floats, series: Floats) -> SingleIndex:
    """Fit one index to the slopes (K, L) of L outcomes on K predictors, with influence `series` (T, K, L).

    Minimum distance with one weight a slope, the inverse of its own variance sum_t series^2: given loadings the
    combination is a weighted regression and the other way round, until neither moves. With D the derivative of the
    fit, its error is (D' W D)^-1 D' W times that of the slopes, and N' slopes, N' D = 0, is zero under the hypothesis
    whatever the weights. Test it with `wald` on the stacked series.
    Source: the single-index restriction of Cochrane and Piazzesi (2005, AER 95:138); the latent-variable restriction of
    Hansen and Hodrick (1983). Minimum distance with diagonal weights is our own choice: it needs no inverse of the
    covariance of all slopes, of which there may be more than cosines.
    Raises InferenceError where there is one predictor or one outcome, or where the loadings add up to nothing.
    """
    K, L = slopes.shape
    if K < 2 or L < 2:
        raise InferenceError(
            f"one index for {L} outcomes and {K} predictors tests nothing; two or more of both are needed"
        )
    weights = 1.0 / (series**2).sum(axis=0)
    combination, loadings = _rank_one(slopes, weights)
    mean = loadings.mean()
    if abs(mean) < 1e-6 * np.abs(loadings).max():
        raise InferenceError("the loadings of one index add up to nothing, so it has no scale; test other outcomes")
    combination, loadings = combination * mean, loadings / mean
    return SingleIndex(
        combination=combination,
        loadings=loadings,
        influence=_influence(combination, loadings, weights, series),
        hypothesis=_hypothesis(combination, loadings),
    )


def _rank_one(slopes: Floats, weights: Floats) -> tuple[Floats, Floats]:
    """Alternating weighted least squares from the largest singular value."""
    u, s, v = np.linalg.svd(slopes)
    combination, loadings = u[:, 0] * s[0], v[0]
    for _ in range(STEPS):
        before = np.outer(combination, loadings)
        combination = (weights * slopes) @ loadings / (weights @ loadings**2)
        loadings = combination @ (weights * slopes) / (combination**2 @ weights)
        if np.abs(np.outer(combination, loadings) - before).max() <= SETTLED * np.abs(before).max():
            return combination, loadings
    raise InferenceError("the fit of one index to the slopes does not settle; take fewer predictors or outcomes")


def _derivative(combination: Floats, loadings: Floats) -> Floats:
    """Of the stacked fit (K L) by combination and loadings (K + L)."""
    K, L = len(combination), len(loadings)
    by_combination = np.kron(loadings[:, None], np.eye(K))
    by_loadings = np.kron(np.eye(L), combination[:, None])
    return np.hstack([by_combination, by_loadings])


def _influence(combination: Floats, loadings: Floats, weights: Floats, series: Floats) -> Floats:
    """Influence (T, K + L) of combination and loadings, whose mean is held at one."""
    K, L = len(combination), len(loadings)
    free = np.vstack([np.eye(L - 1), -np.ones((1, L - 1))])  # loadings move so that their sum stays
    moves = np.block([[np.eye(K), np.zeros((K, L - 1))], [np.zeros((L, K)), free]])
    derivative = _derivative(combination, loadings) @ moves
    weighted = derivative * weights.T.reshape(-1, 1)
    solved = np.linalg.solve(derivative.T @ weighted, weighted.T)
    stacked = series.transpose(0, 2, 1).reshape(len(series), K * L)
    found: Floats = stacked @ solved.T @ moves.T
    return found


def _hypothesis(combination: Floats, loadings: Floats) -> Restrictions:
    matrix = null_space(_derivative(combination, loadings).T).T
    return restrictions([f"restriction {number}" for number in range(1, len(matrix) + 1)], matrix)
