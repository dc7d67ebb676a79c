"""A few cells of the size table at low runs: what must hold, and what must fail if the worlds are any test at all.

Every sample has a stream of random numbers fixed by the cell's name, so the rates are the same on every run. Monte
Carlo error of a rate of 5%: 1.3 points in 300 samples, 1.8 in 150.
"""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).resolve().parents[2] / "scripts"))

from size_cells import percentages


def rates(part: str, world: str, runs: int, draws: int = 0) -> dict[str, float]:
    """Percentages by test of a cell with one row."""
    name = f"{part}, {world}{', draws' if draws else ''}"
    return {test: found for (_, test), found in percentages(name, runs, draws).items()}


def test_currencies_hold_by_one_period_errors_and_fail_by_kernels_and_clusters() -> None:
    found = rates("currencies", "N 10, T 240, h 12", 300)
    assert 1.5 < found["one-period"] < 9
    assert found["instrument"] < 7
    assert 10 < found["bartlett"] < 24
    assert found["clustered: entity"] > 15
    assert found["clustered: date"] > 40


def test_clusters_by_entity_fail_most_in_a_wide_panel() -> None:
    assert rates("currencies", "N 30, T 240, h 3", 120)["clustered: entity"] > 33


def test_a_persistent_ratio_holds_by_the_instrument_only() -> None:
    found = rates("equities", "N 1, T 480, h 12, phi 0.985", 300)
    assert found["instrument"] < 7
    assert found["one-period"] > 6
    assert found["bartlett"] > 15


def test_newey_west_fails_over_five_years() -> None:
    found = rates("equities", "N 1, T 480, h 60, phi 0.985", 200)
    assert found["bartlett"] > 28
    assert found["instrument"] < 8


@pytest.mark.parametrize(
    ("part", "world", "runs"),
    [
        ("currencies", "N 10, T 240, h 12", 60),
        ("equities", "N 1, T 480, h 1, phi 0.985", 150),
        ("equities", "N 1, T 480, h 12, phi 0.985", 150),
        ("equities", "N 1, T 480, h 60, phi 0.985", 150),
        ("equities", "N 15, T 240, h 12, phi 0.985", 80),
    ],
)
def test_full_draws_hold(part: str, world: str, runs: int) -> None:
    assert 0.5 < rates(part, world, runs, 199)["draws"] < (11.5 if runs == 150 else 14)


def test_newey_west_fails_for_bonds_and_the_instrument_holds() -> None:
    found = percentages("bonds, 1 root .98, N 1, T 480", 250, 0)
    for rest in ("n 5", "pooled"):
        row = f"1 root .98, N 1, T 480, {rest}"
        assert 15 < found[row, "bartlett"] < 32
        assert found[row, "instrument"] < 6.5
        assert found[row, "one-period"] > found[row, "instrument"]


@pytest.mark.parametrize("roots", ["1 root .98", "2 roots .93 .99", "3 roots .7 .94 .99"])
def test_draws_of_curves_hold_with_one_two_and_three_roots(roots: str) -> None:
    found = percentages(f"bonds, {roots}, N 1, T 240, draws", 150, 199)
    for rest in ("n 2", "n 5", "pooled"):
        assert 0.5 < found[f"{roots}, N 1, T 240, {rest}", "draws"] < 11.5


def test_draws_of_ten_economies_hold() -> None:
    found = percentages("bonds, 1 root .98, N 10, T 240, draws", 30, 199)
    assert found["1 root .98, N 10, T 240, pooled", "draws"] < 18


def test_stacked_one_period_errors_hold_over_overlapping_horizons() -> None:
    found = percentages("joint, currencies, N 1, T 240", 200, 0)
    for count in (2, 5, 7):
        assert 1 < found[f"currencies, N 1, T 240, {count} horizons", "stacked one-period"] < 10.5


def test_joint_draws_hold_over_overlapping_horizons_and_maturities() -> None:
    currencies = percentages("joint, currencies, N 1, T 240, draws", 80, 399)
    bonds = percentages("joint, bonds, 3 roots .7 .94 .99, N 1, T 240, draws", 80, 399)
    found = [rate for (_, test), rate in (currencies | bonds).items() if test == "draws"]
    assert len(found) == 6
    assert 0 < min(found) <= max(found) < 12


def test_one_period_intervals_cover_and_kernel_intervals_do_not() -> None:
    found = rates("coverage", "N 10, T 240, h 12", 400)
    assert 91.5 < found["one-period"] < 98.5
    assert found["bartlett"] < 90
    assert found["bartlett"] < found["cosine"] < found["one-period"]
