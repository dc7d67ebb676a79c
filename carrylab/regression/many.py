"""p-values of many tests at once: Holm for the chance of any false rejection, and the false-discovery rate."""

from __future__ import annotations

import numpy as np

from carrylab.regression.sample import Floats


def holm(p_values: Floats) -> Floats:
    """Adjusted p-values (m,) that keep the chance of any false rejection, whatever the dependence.

    p_(j) max over i <= j of (m - i + 1) p_(i), at most one. Source: Holm (1979, Scandinavian J. Statistics 6:65).

    >>> holm(np.array([0.01, 0.04, 0.03]))
    array([0.03, 0.06, 0.06])
    """
    order = np.argsort(p_values, kind="stable")
    m = len(p_values)
    raw = np.maximum.accumulate((m - np.arange(m)) * p_values[order])
    return _placed(np.minimum(raw, 1.0), order)


def false_discovery(p_values: Floats) -> Floats:
    """Adjusted p-values (m,) that keep the expected share of false rejections among all rejections.

    p_(j) min over i >= j of (m / i) p_(i), at most one; for independent or positively dependent tests.
    Source: Benjamini and Hochberg (1995, JRSS B 57:289).

    >>> false_discovery(np.array([0.01, 0.04, 0.03]))
    array([0.03, 0.04, 0.04])
    """
    order = np.argsort(p_values, kind="stable")
    m = len(p_values)
    raw = np.minimum.accumulate((m / np.arange(m, 0, -1)) * p_values[order][::-1])[::-1]
    return _placed(np.minimum(raw, 1.0), order)


def _placed(values: Floats, order: np.ndarray) -> Floats:
    found = np.empty_like(values)
    found[order] = values
    return found
