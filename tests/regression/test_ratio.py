"""Intervals for a ratio: a set worked by hand, the point inside it, and its three shapes."""

import math

import numpy as np
import pytest

from carrylab.regression.ratio import ratio_interval


def test_hand_worked() -> None:
    # a = 2, b = 4, Vaa = Vbb = 1, Vab = 0, c = 2: (2 - 4q)^2 <= 4 (1 + q^2), so 12 q^2 - 16 q <= 0: q in [0, 4/3].
    found = ratio_interval(2.0, 4.0, np.eye(2), 2.0)
    assert found.kind == "interval"
    assert (found.lower, found.upper) == (pytest.approx(0.0, abs=1e-15), pytest.approx(4 / 3))


def test_the_ends_are_where_the_test_just_rejects() -> None:
    covariance = np.array([[0.04, 0.01], [0.01, 0.09]])
    found = ratio_interval(0.7, 1.4, covariance, 1.96)
    for end in (found.lower, found.upper):
        direction = np.array([1.0, -end])
        t = (0.7 - end * 1.4) / math.sqrt(direction @ covariance @ direction)
        assert abs(t) == pytest.approx(1.96)
    assert found.lower < 0.5 < found.upper


def test_shapes_where_the_denominator_may_be_zero() -> None:
    assert ratio_interval(0.1, 0.1, np.eye(2), 1.96).kind == "whole line"
    assert ratio_interval(10.0, 0.1, np.eye(2), 1.96).kind == "outside of the interval"
