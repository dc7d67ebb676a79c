"""Static, dynamic and common parts: exact means on any panel, the usual estimators on balanced ones, and the base."""

import numpy as np
import pytest

from carrylab.errors import SampleError
from carrylab.evidence.parts import with_base
from carrylab.regression.fit import fit
from carrylab.regression.parts import PARTS, parts
from carrylab.regression.sample import Floats, Sample, make_sample, take


def panel(x: Floats, *legs: Floats, overlap: int = 0) -> Sample:
    return make_sample(
        x[:, :, None],
        np.stack(legs, axis=2),
        terms=("signal",),
        legs=tuple(f"leg {number}" for number in range(len(legs))),
        steps=np.full(len(x), overlap + 1),
        overlap=overlap,
        one_step=(None,) * len(legs),
    )


def random_panel(*, holes: bool = False, T: int = 60, N: int = 4) -> Sample:
    rng = np.random.default_rng(3)
    x = rng.normal(size=N) + rng.normal(size=(T, 1)) + rng.normal(size=(T, N))
    y = 0.5 * x + rng.normal(size=N) + rng.normal(size=(T, 1)) + rng.normal(size=(T, N))
    if holes:
        x[:20, 0] = np.nan
        y[50:, 2] = np.nan
    return panel(x, y, x - y)


def test_two_entities_on_two_dates_by_hand() -> None:
    # Entity means 1 and 3, date means 1 and 3, grand mean 2.
    x = np.array([[0.5, 1.5], [1.5, 4.5]])
    y = np.array([[0.0, 1.0], [1.0, 4.0]])
    found = parts(panel(x, y))
    # x = 2 + a (-1, 1) + c (-1, 1) + d (.5, -.5; -.5, .5): sums of squares 4, 1, 4 of 9.
    assert found.shares == pytest.approx([4 / 9, 1 / 9, 4 / 9])
    # sum a y = 4, sum c y = 4, sum d y = .5 (0 - 1 - 1 + 4) = 1: all slopes are one.
    assert found.slopes[:, 0] == pytest.approx([1.0, 1.0, 1.0])
    assert found.balanced


@pytest.mark.parametrize("holes", [False, True])
def test_the_pooled_slope_is_the_mean_of_the_parts(holes: bool) -> None:
    sample = random_panel(holes=holes)
    found = parts(sample)
    assert found.balanced is not holes
    assert found.shares.sum() == pytest.approx(1.0, abs=1e-13)
    pooled = fit(sample, effects="none").coefficients[0]
    assert found.shares @ found.slopes == pytest.approx(pooled, abs=1e-12)
    assert found.pooled == pytest.approx(pooled, abs=1e-12)
    # The legs add up to the signal, so each part's slopes add up to one, and the two legs are one fact.
    assert found.slopes.sum(axis=1) == pytest.approx([1.0] * 3, abs=1e-12)
    assert found.influence.sum(axis=2) == pytest.approx(np.zeros((60, 3)), abs=1e-12)


def test_on_a_balanced_panel_effects_leave_their_parts() -> None:
    sample = random_panel()
    found = parts(sample)
    static, dynamic, common = (found.shares[part] * found.slopes[part] for part in range(3))
    s, d, c = found.shares
    assert fit(sample, effects="entity").coefficients[0] == pytest.approx((dynamic + common) / (d + c), abs=1e-12)
    assert fit(sample, effects="time").coefficients[0] == pytest.approx((static + dynamic) / (s + d), abs=1e-12)
    both = fit(sample, effects="both")
    assert both.coefficients[0] == pytest.approx(found.slopes[1], abs=1e-12)
    assert both.influence[:, 0] == pytest.approx(found.influence[:, 1], abs=1e-12)
    x, y = sample.x.mean(axis=1)[:, None], sample.y.mean(axis=1)[:, None]
    means = fit(panel(x[:, :, 0], y[:, :, 0], y[:, :, 1]), effects="none")
    assert means.coefficients[0] == pytest.approx(found.slopes[2], abs=1e-12)
    assert means.influence[:, 0] == pytest.approx(found.influence[:, 2], abs=1e-12)


@pytest.mark.parametrize("part", range(3), ids=PARTS)
def test_the_influence_is_what_one_more_copy_of_a_date_does(part: int) -> None:
    sample = random_panel()
    found, copies, date = parts(sample), 2000, 7
    rows = np.append(np.repeat(np.arange(60), copies), date)
    more = parts(panel(sample.x[rows, :, 0], sample.y[rows, :, 0], sample.y[rows, :, 1]))
    assert (more.slopes - found.slopes)[part] * copies == pytest.approx(found.influence[date, part], rel=2e-3, abs=1e-5)


def test_errors_of_the_static_part_hold_in_simulation() -> None:
    """Standing differences as given: the t of the static slope spreads by one."""
    rng = np.random.default_rng(11)
    standing = np.array([-1.0, -0.2, 0.3, 0.9])
    statistics = []
    for _ in range(400):
        x = standing + rng.normal(size=(200, 4))
        y = 0.7 * standing + rng.normal(size=(200, 1)) + rng.normal(size=(200, 4))
        found = parts(panel(x, y))
        statistics.append((found.slopes[0, 0] - 0.7) / np.sqrt((found.influence[:, 0, 0] ** 2).sum()))
    assert np.std(statistics) == pytest.approx(1.0, abs=0.12)
    assert abs(np.mean(statistics)) < 0.2


def test_with_the_base_as_zeros_static_and_dynamic_parts_do_not_depend_on_it() -> None:
    rng = np.random.default_rng(5)
    x, y = rng.normal(size=(50, 3)) + np.array([1.0, 0.0, -1.0]), rng.normal(size=(50, 3))
    # The same three currencies and the home, quoted against the first of them: x_i - x_1, and -x_1 for the home.
    moved = [np.column_stack([-v[:, 0], v[:, 1] - v[:, 0], v[:, 2] - v[:, 0]]) for v in (x, y)]
    home, other = parts(with_base(panel(x, y))), parts(with_base(panel(*moved)))
    assert home.slopes[:2] == pytest.approx(other.slopes[:2], abs=1e-12)
    assert abs(home.slopes[2, 0] - other.slopes[2, 0]) > 0.01


def test_one_entity_is_refused() -> None:
    with pytest.raises(SampleError, match="one entity has no static"):
        parts(take(random_panel(), [0]))
