"""A few cells of the size table at low runs: what must hold, and what must fail if the worlds are any test at all."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).resolve().parents[2] / "scripts"))

import size

RUNS = 300  # Monte Carlo error at 5%: 1.3 points


def test_currencies_hold_by_one_period_errors_and_fail_by_kernels_and_clusters() -> None:
    found = size.rejections(size.currency_cell(240, 10, 12), RUNS, 1)
    assert 0.015 < found["one-period"] < 0.09
    assert found["instrument"] < 0.07
    assert 0.10 < found["bartlett"] < 0.24
    assert found["clustered: entity"] > 0.15


def test_a_persistent_ratio_holds_by_the_instrument_only() -> None:
    found = size.rejections(size.equity_cell(480, 1, 12, 0.985), RUNS, 2)
    assert found["instrument"] < 0.07
    assert found["one-period"] > 0.06
    assert found["bartlett"] > 0.15


@pytest.mark.parametrize("cell", [size.equity_cell(240, 1, 12, 0.985), size.currency_cell(240, 10, 12)])
def test_full_draws_hold(cell: size.Cell) -> None:
    assert size.drawn_rejections(cell, 150, 199, 3) < 0.115
