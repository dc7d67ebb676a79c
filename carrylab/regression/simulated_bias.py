"""The predicted bias of the slope in many simulated samples at once, by the formulas of `predicted_bias`."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from carrylab.regression.bias import PERSISTENCE_CAP
from carrylab.regression.draws_measure import take_out
from carrylab.regression.sample import Floats
from carrylab.regression.simulated import Frame
from carrylab.regression.simulated_slopes import Weighed


@dataclass(frozen=True, eq=False, slots=True)
class Shift:
    """What the bias of B samples is made from; a pair is that of `Simulated`, three numbers a quadratic form in b.

    `raw` (B,): pooled AR(1) slope of the signal. `squares` (3, B): of the signal now, with the one before, and before.
    `products` (2, 2, B): of the pair of one-period outcomes with the signal now and before. `together` (3, B), `apart`
    (N, 3, B): squared date sums and each entity's squares of the rows' part in the slope.
    """

    raw: Floats
    squares: Floats
    products: Floats
    together: Floats
    apart: Floats

    def ratio(self, frame: Frame, b: float, std_error: Floats) -> Floats:
        """Predicted bias over standard error (B,) in samples to which a slope of b was added."""
        estimate, sample = frame.estimate, frame.sample
        length = estimate.n_obs / estimate.n_entities
        form = np.array([1.0, 2.0 * b, b * b])
        apart = np.sqrt(np.einsum("k,nkb->nb", form, self.apart)).sum(axis=0) ** 2
        entities = np.minimum(apart / np.einsum("k,kb->b", form, self.together), estimate.n_entities)
        mean_share = np.ones_like(entities) if estimate.effects in ("entity", "both") else 1.0 / entities
        corrected = self.raw + (mean_share * (1.0 + self.raw) + 2.0 * self.raw / entities) / length
        phi = np.minimum(corrected, PERSISTENCE_CAP)
        now, before = self.products[0] + b * self.products[1]
        gamma = (now - phi * before) / (self.squares[0] - 2.0 * phi * self.squares[1] + phi**2 * self.squares[2])
        steps = int(np.median(sample.steps[sample.mask.any(axis=1)]))
        powers = (phi ** np.arange(1, steps + 1)[:, None]).sum(axis=0)
        bias = -gamma * (mean_share * steps * (1.0 + phi) + 2.0 / entities * powers) / length
        ratio: Floats = bias / std_error
        return ratio


def shift_of(frame: Frame, x: Floats, news: Floats, squares: Weighed) -> Shift:
    """The parts of the bias from the signal after the effects are out (T, N, B) and both one-period outcomes."""
    outcome, mask = frame.sample.one_step[0], frame.mask
    assert outcome is not None
    lagged = mask[1:] & mask[:-1]
    inside = lagged[:, :, None]
    raw = (x[1:] * x[:-1] * inside).sum(axis=(0, 1)) / (x[:-1] ** 2 * inside).sum(axis=(0, 1))
    both = lagged & np.isfinite(outcome.outcomes[1:])
    now, before = (_demeaned(part, both) for part in (x[1:], x[:-1]))
    pair = [_demeaned(part[1:], both) * outcome.weights.mean() for part in news]
    rows = squares.rows(0)
    series = squares.influence(0)
    return Shift(
        raw=raw,
        squares=np.stack([_inner(now, now), _inner(now, before), _inner(before, before)]),
        products=np.stack([np.stack([_inner(part, now), _inner(part, before)]) for part in pair]),
        together=np.stack([np.einsum("tb,tb->b", series[:, i], series[:, j]) for i, j in ((0, 0), (0, 1), (1, 1))]),
        apart=np.stack([np.einsum("tnb,tnb->nb", rows[i], rows[j]) for i, j in ((0, 0), (0, 1), (1, 1))], axis=1),
    )


def _inner(first: Floats, second: Floats) -> Floats:
    products: Floats = np.einsum("tnb,tnb->b", first, second)
    return products


def _demeaned(values: Floats, rows: np.typing.NDArray[np.bool_]) -> Floats:
    """A copy less each entity's mean over some rows, zero elsewhere."""
    rest = np.array(values)
    take_out(rest, rows, "entity")
    return rest
