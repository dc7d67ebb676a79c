"""The pooled slope split into its static, dynamic and common parts, each with its influence series."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from carrylab.errors import SampleError
from carrylab.regression.sample import Bools, Floats, Sample

PARTS = ("static", "dynamic", "common")
NO_VARIATION = 1e-10  # a part with less than this share of the signal's variance has no slope


@dataclass(frozen=True, eq=False, slots=True)
class Parts:
    """Slopes of every leg by part of the signal.

    In the order static (an entity's mean less the grand mean), dynamic (what entity and date leave) and common (a
    date's mean less the grand mean): `shares` (3,) of the signal's variance, `slopes` (3, L), NaN where a part does
    not vary, and their `influence` (T, 3, L). `pooled` (L,) is the slope without effects, exactly `shares` times
    `slopes`. `balanced`: every entity stands on every used date.
    """

    shares: Floats
    slopes: Floats
    influence: Floats
    pooled: Floats
    balanced: bool


def parts(sample: Sample) -> Parts:
    """Split the slope of every leg on the first term.

    x_it - x = a_i + d_it + c_t with a_i = x_i - x, c_t = x_t - x of the entity's and the date's own rows. Each part z
    is an instrument for x: slope_z = sum z y / sum z x, share_z = sum z x / sum (x_it - x) x_it. The three shares add
    up to one and the pooled slope is their weighted mean on any panel. On a balanced panel the parts are orthogonal, so
    the shares are shares of variance, entity effects give dynamic and common together, time effects static and
    dynamic. Date scores, with e = y - x slope less grand means and e_i its mean over an entity's rows:
    static sum_i a_i (e_it - e_i) + e_i (x_it - x_i), dynamic sum_i d_it e_it - e_i (x_it - x_i), common
    c_t sum_i e_it. Entities are taken as given, dates as random; the scores follow from the error of the estimated
    means x_i, and are our own.
    Source: Hassan and Mano (2019, QJE 134:397) for currencies on balanced panels; the instruments are our own form.
    """
    mask = sample.mask
    if mask.any(axis=0).sum() < 2:
        raise SampleError(f"{sample.label}: one entity has no static and no dynamic part; take two or more")
    x = _centred(sample.x[:, :, 0], mask)
    y = np.stack([_centred(sample.y[:, :, leg], mask) for leg in range(sample.y.shape[2])], axis=2)
    of_entity, of_date = _means(x, mask)
    within = (x - of_entity) * mask
    instruments = np.stack([of_entity * mask, within - of_date * mask, of_date * mask])
    crossed = np.einsum("pti,ti->p", instruments, x)
    stands = crossed > NO_VARIATION * (x**2).sum()
    divisor = np.where(stands, crossed, np.nan)
    slopes = np.einsum("pti,til->pl", instruments, y) / divisor[:, None]
    influence = np.empty((len(mask), len(PARTS), y.shape[2]))
    for part, slope in enumerate(np.nan_to_num(slopes)):
        scores = _scores(instruments, within, y - x[:, :, None] * slope, mask)
        influence[:, part] = scores[part] / divisor[part]
    return Parts(
        shares=crossed / (x**2).sum(),
        slopes=slopes,
        influence=influence,
        pooled=np.einsum("ti,til->l", x, y) / (x**2).sum(),
        balanced=bool(mask.sum() == mask.any(axis=0).sum() * mask.any(axis=1).sum()),
    )


def _centred(values: Floats, mask: Bools) -> Floats:
    """Values less their grand mean, zero outside the mask."""
    centred: Floats = (values - values.sum() / mask.sum()) * mask
    return centred


def _means(values: Floats, mask: Bools) -> tuple[Floats, Floats]:
    """Means of an entity's own rows (N,) and of a date's own rows (T, 1)."""
    of_entity = values.sum(axis=0) / np.maximum(mask.sum(axis=0), 1)
    of_date = values.sum(axis=1, keepdims=True) / np.maximum(mask.sum(axis=1, keepdims=True), 1)
    return of_entity, of_date


def _scores(instruments: Floats, within: Floats, errors: Floats, mask: Bools) -> Floats:
    """Date scores (3, T, L) of all parts from the residuals (T, N, L) of one slope; `within` is x_it - x_i (T, N)."""
    mean = errors.sum(axis=0) / np.maximum(mask.sum(axis=0), 1)[:, None]
    moved = np.einsum("ti,il->tl", within, mean)
    static, dynamic, common = (np.einsum("ti,til->tl", z, errors) for z in instruments)
    static -= np.einsum("ti,il->tl", instruments[0], mean)
    return np.stack([static + moved, dynamic - moved, common])
