"""Adjusted p-values against statsmodels and by hand."""

import numpy as np
import pytest
from statsmodels.stats.multitest import multipletests

from carrylab.regression.many import false_discovery, holm


@pytest.mark.parametrize("seed", range(5))
def test_adjusted_p_values_are_those_of_statsmodels(seed: int) -> None:
    p_values = np.random.default_rng(seed).random(23) ** 2
    p_values[3] = p_values[7]
    assert holm(p_values) == pytest.approx(multipletests(p_values, method="holm")[1], abs=1e-14)
    assert false_discovery(p_values) == pytest.approx(multipletests(p_values, method="fdr_bh")[1], abs=1e-14)


def test_holm_by_hand() -> None:
    # Sorted .01, .03, .04: 3 x .01, 2 x .03, then no less than that for 1 x .04.
    assert holm(np.array([0.04, 0.01, 0.03])) == pytest.approx([0.06, 0.03, 0.06])


def test_nothing_exceeds_one_and_none_is_fine() -> None:
    assert holm(np.array([0.9, 0.8])).max() == 1.0
    assert len(false_discovery(np.array([]))) == 0
