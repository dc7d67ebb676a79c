"""The marks of each mistake in covered parity, simulated, and how sure the check is of them."""

from __future__ import annotations

import numpy as np
import pytest

from carrylab.data.calendar import Floats, parse_tenor
from carrylab.data.checks.covered import Covered, fit_covered

# Act/360 over a quarter of 91.3 days, a basis of -15bp a year.
TAU, YEARS, BASIS = 91.3 / 360.0, 0.25, -0.0015
T = 360


def walk(rng: np.random.Generator, level: float, step: float) -> Floats:
    found = np.empty(T)
    found[0] = level
    for t in range(1, T):
        found[t] = level + 0.985 * (found[t - 1] - level) + step * rng.standard_normal()
    return found


class World:
    """Simple rates of two currencies, spot, and the three-month forward that covered parity and the basis give."""

    def __init__(self) -> None:
        rng = np.random.default_rng(7)
        self.own, self.home = walk(rng, 0.06, 0.003), walk(rng, 0.03, 0.002)
        self.spot = np.log(1.5) + np.cumsum(0.025 * rng.standard_normal(T))
        self.daily = 0.025 / np.sqrt(21) * rng.standard_normal((T, 21)).cumsum(axis=1)
        noise = BASIS + 0.0002 * rng.standard_normal(T)
        self.forward = self.spot - YEARS * (logs(self.own) - logs(self.home) + noise)


def logs(rate: Floats) -> Floats:
    return np.log1p(rate * TAU) / YEARS


WORLD = World()


def fitted(
    *, discount: Floats | None = None, own: Floats | None = None, home: Floats | None = None, years: float = YEARS
) -> Covered:
    """Covered parity of the world with some of its parts exchanged."""
    y = (WORLD.spot - WORLD.forward) / years if discount is None else discount
    rates = (logs(WORLD.own) if own is None else own, logs(WORLD.home) if home is None else home)
    return fit_covered(("BBB", parse_tenor("3m")), y, rates)


def test_a_right_market_has_slope_one_and_no_finding() -> None:
    right = fitted()
    assert right.slope == pytest.approx(1.0, abs=0.01)
    assert right.r2 > 0.999
    assert right.own == pytest.approx(1.0, abs=0.02)
    assert right.home == pytest.approx(-1.0, abs=0.02)
    assert right.level() is None


def test_the_day_count_is_too_small_to_see_in_a_slope() -> None:
    other = np.log1p(WORLD.own * 91.3 / 365) / YEARS, np.log1p(WORLD.home * 91.3 / 365) / YEARS
    slope = fitted(own=other[0], home=other[1]).slope
    assert slope / fitted().slope == pytest.approx(365 / 360, abs=0.002)
    assert fitted(own=other[0], home=other[1]).level() is None


def turned() -> Covered:
    return fitted(discount=(WORLD.forward - WORLD.spot) / YEARS)


def both_rates(factor: float) -> Covered:
    return fitted(own=logs(WORLD.own * factor), home=logs(WORLD.home * factor))


OUTRIGHT = np.exp(WORLD.forward)
POINTS = OUTRIGHT - np.exp(WORLD.spot)
STALE = np.concatenate([WORLD.spot[:1], WORLD.spot[:-1]])
AVERAGED = WORLD.spot + WORLD.daily.mean(axis=1) - WORLD.daily[:, -1]

# The mistake: what is fitted, the slope it leaves (None: no number worth naming), where to look, and words.
MISTAKES = {
    "quotes turned round": (turned(), -1.0, "deposits", "turned round"),
    "rates swapped": (fitted(own=logs(WORLD.home), home=logs(WORLD.own)), -1.0, "deposits", "swapped"),
    "percent for decimals": (
        fitted(own=100 * logs(WORLD.own), home=100 * logs(WORLD.home)),
        0.01,
        "deposits",
        "percent",
    ),
    "basis points for decimals": (
        fitted(own=1e4 * logs(WORLD.own), home=1e4 * logs(WORLD.home)),
        0.0001,
        "deposits",
        "basis points",
    ),
    "decimals for percent": (both_rates(0.01), 100.0, "deposits", "decimals taken for percent"),
    "rates a month": (both_rates(1 / 12), 12.0, "deposits", "a month"),
    "rates a quarter": (both_rates(1 / 4), 4.0, "deposits", "a quarter taken for rates a year"),
    "not annualised": (fitted(years=1.0), 0.25, "forwards", "quarter of the declared length"),
    "three months for one": (fitted(years=1 / 12), 3.0, "forwards", "three times"),
    "own rate a month": (fitted(own=logs(WORLD.own / 12)), None, "deposits", "its own rate enters with 12"),
    "home rate a month": (fitted(home=logs(WORLD.home / 12)), None, "deposits", "the home rate enters with 12"),
    "spot alone turned round": (fitted(discount=(-WORLD.spot - WORLD.forward) / YEARS), None, "forwards", "only one"),
    "points for prices": (fitted(discount=(WORLD.spot - np.log(np.abs(POINTS))) / YEARS), None, "forwards", "prices"),
    "points unscaled": (
        fitted(discount=(WORLD.spot - np.log(np.exp(WORLD.spot) + 1e3 + 1e4 * POINTS)) / YEARS),
        None,
        "forwards",
        "scale",
    ),
    "stale spot": (fitted(discount=(STALE - WORLD.forward) / YEARS), None, "spot", "stale"),
    "averaged spot": (fitted(discount=(AVERAGED - WORLD.forward) / YEARS), None, "spot", "averages"),
}


@pytest.mark.parametrize("what", list(MISTAKES))
def test_a_mistake_is_an_error_and_is_named(what: str) -> None:
    found, slope, role, words = MISTAKES[what]
    assert found.level() == "error"
    if slope is not None:
        assert found.slope == pytest.approx(slope, rel=0.05)
        assert found.r2 > 0.99
    where, said = found.signature()
    assert where == role
    assert words in said


def test_a_stale_spot_has_no_fit_whatever_its_slope() -> None:
    # Monthly changes of 2.5% over a quarter of a year: noise of 10% a year against differentials of 1 or 2%.
    assert fitted(discount=(STALE - WORLD.forward) / YEARS).r2 < 0.15
    assert fitted(discount=(AVERAGED - WORLD.forward) / YEARS).r2 < 0.25


@pytest.mark.parametrize(("apart", "level"), [(0.002, None), (0.4, "warning"), (0.7, "error")])
def test_a_rate_of_another_length_is_as_bad_as_it_is_far_apart(apart: float, level: str | None) -> None:
    # Percent a year between the two lengths: within a basis, in doubt, wrong.
    rng = np.random.default_rng(4)
    found = fitted(own=logs(WORLD.own + apart / 100 * rng.standard_normal(T)))
    assert found.slope == pytest.approx(1.0, abs=0.25)
    assert found.level() == level
    assert "another length" in found.signature()[1]


def test_a_basis_on_a_small_differential_is_no_error() -> None:
    # A peg: differentials of 5bp, a basis of 10bp. There is no fit, and nothing is wrong by more than a basis.
    rng = np.random.default_rng(3)
    own = logs(WORLD.home) + 0.0005 * rng.standard_normal(T)
    discount = own - logs(WORLD.home) + 0.001 * rng.standard_normal(T)
    found = fitted(discount=discount, own=own)
    assert found.r2 < 0.5
    assert found.level() in (None, "warning")
