"""The IVX instrument in panels: slopes that a persistent signal does not bias, with errors from one-period outcomes."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.signal import lfilter

from carrylab.errors import SampleError
from carrylab.regression.effects import Absorbed, Effects, blocks
from carrylab.regression.fit import Estimate
from carrylab.regression.one_period import NullInfluence, null_influence
from carrylab.regression.sample import Bools, Floats, Sample

EXPONENT = 0.95  # Kostakis, Magdalinos and Stamatogiannis (2015): the mildest filtering they allow
UNRELATED = 1e-12  # an instrument whose product with its own term is below this part of both lengths


@dataclass(frozen=True, eq=False, slots=True)
class Instrumented:
    """Instrumental-variable estimate of all legs on the sample's terms.

    `estimate`: coefficients (K+1, L) and influence (T, K+1, L) are the instrument's own, from residuals, valid at any
    value of the slope; its bread is not symmetric; r2 and squares are still those of least squares.
    `carrier`: the sample with the instruments (T, N, K) in place of the terms. `root`: R_z of the filter.
    """

    estimate: Estimate
    carrier: Sample
    root: float


def instrument(sample: Sample, estimate: Estimate) -> Instrumented:
    """Estimate all legs with the IVX instrument of every term.

    z_it = R z_i,t-1 + (x_it - x_i,t-1), zero at an entity's first used date, R = 1 - 1 / T^.95, T the periods that the
    used windows span; a hole of g periods is bridged by R^g and the whole change. Raw z, never demeaned by entity,
    for an entity mean knows the future; time effects take the mean of the date out of z.
    b = B^-1 sum w z y~, B = sum w z x~', x~ and y~ after the effects are out.
    `estimate` is the least-squares fit, whose effects and date weights hold. Raises SampleError where z has nothing in
    common with its term.
    Source: Phillips and Magdalinos (2009); Kostakis, Magdalinos and Stamatogiannis (2015, RFS 28:1506). The panel
    form, holes and time effects are our own.
    """
    used: Bools = sample.mask & (estimate.weights > 0)[:, None]
    span = estimate.last - estimate.first + 1 + sample.overlap
    root = 1.0 - span**-EXPONENT
    carrier = replace(sample, x=_without_date_means(filtered(sample.x, used, root), used, estimate.effects))
    return Instrumented(_estimated(sample, estimate, carrier), carrier, root)


def instrument_null(found: Instrumented, leg: int) -> NullInfluence:
    """Influence series of one leg's instrumented coefficients under the null of no premium.

    V = sum_tau (sum_i u_{i,tau} Wz_{i,tau})^2 between two B^-1, Wz_tau the sum of z over the used origins whose window
    covers tau and u the one-period outcomes after their own effects: Hodrick's 1B scores carried by z instead of x.
    Outcomes by period or by origin and step, as in `null_influence`. Its covariance is the sum by date, law normal.
    Source: our own combination of Kostakis, Magdalinos and Stamatogiannis (2015) and Hodrick (1992).
    """
    nothing = replace(
        found.estimate.absorbed,
        entity=np.zeros_like(found.estimate.absorbed.entity),
        date=np.zeros_like(found.estimate.absorbed.date),
    )
    return null_influence(found.carrier, replace(found.estimate, absorbed=nothing), leg)


def filtered(x: Floats, used: Bools, root: float) -> Floats:
    """The instruments (T, N, K) of the terms (T, N, K) over each entity's used dates, zero elsewhere.

    z_t = root^gap z_last + x_t - x_last, last the used date before t: a linear filter of the changes, since on dates
    in between it only fades.
    """
    rows = np.where(used, np.arange(len(x))[:, None], -1)
    newest = np.maximum.accumulate(rows, axis=0)
    last = np.vstack([np.full((1, used.shape[1]), -1), newest[:-1]])
    known = (used & (last >= 0))[:, :, None]
    before = np.take_along_axis(x, np.maximum(last, 0)[:, :, None], axis=0)
    changes = np.where(known, x - before, 0.0)
    z: Floats = lfilter([1.0], [1.0, -root], changes, axis=0) * used[:, :, None]
    return z


def _without_date_means(z: Floats, used: Bools, effects: Effects) -> Floats:
    if effects in ("none", "entity"):
        return z
    means = z.sum(axis=1) / np.maximum(used.sum(axis=1), 1)[:, None]
    rest: Floats = (z - means[:, None]) * used[:, :, None]
    return rest


def _estimated(sample: Sample, estimate: Estimate, carrier: Sample) -> Estimate:
    k, w = len(estimate.means), estimate.weights
    zx, zy, x, y = _date_products(sample, estimate.absorbed, w, carrier.x)
    inside = np.tensordot(w, zx, axes=1)
    _require_related(sample, estimate, inside, carrier.x)
    inverse = np.linalg.inv(inside)
    slopes = inverse @ np.tensordot(w, zy, axes=1)
    means_y = estimate.coefficients[k] + estimate.means @ estimate.coefficients[:k]
    of_slopes = inverse @ (w[:, None, None] * (zy - zx @ slopes))
    of_const = w[:, None] * (y - x @ slopes) / estimate.total - np.einsum("k,tkl->tl", estimate.means, of_slopes)
    bread = estimate.bread.copy()
    bread[:k, :k], bread[k, :k] = inverse, -(estimate.means @ inverse)
    return replace(
        estimate,
        coefficients=np.vstack([slopes, means_y - estimate.means @ slopes]),
        influence=np.concatenate([of_slopes, of_const[:, None]], axis=1),
        bread=bread,
    )


def _date_products(
    sample: Sample, absorbed: Absorbed, weights: Floats, z: Floats
) -> tuple[Floats, Floats, Floats, Floats]:
    """Sums over entities, by date: z x' (T, K, K), z y' (T, K, L), x (T, K) and y (T, L) after the effects are out."""
    dates, k, legs = len(sample.mask), sample.x.shape[2], sample.y.shape[2]
    zx, zy = np.zeros((dates, k, k)), np.zeros((dates, k, legs))
    sum_x, sum_y = np.zeros((dates, k)), np.zeros((dates, legs))
    for part, x, y in blocks(sample, absorbed, weights):
        turned = z[part].transpose(0, 2, 1)
        zx[part], zy[part] = turned @ x, turned @ y
        sum_x[part], sum_y[part] = x.sum(axis=1), y.sum(axis=1)
    return zx, zy, sum_x, sum_y


def _require_related(sample: Sample, estimate: Estimate, inside: Floats, z: Floats) -> None:
    """Refuse terms whose instruments leave the moments singular: each named."""
    length = np.sqrt(np.einsum("t,tik->k", estimate.weights, z**2))
    size = np.sqrt(np.diag(np.linalg.inv(estimate.bread[:-1, :-1])))
    scaled = inside / np.outer(np.where(length > 0, length, 1.0), size)
    values = np.linalg.svd(scaled)
    if values[1][-1] <= UNRELATED:
        name = sample.terms[int(np.argmax(np.abs(values[2][-1])))]
        raise SampleError(
            f"{sample.label + ': ' if sample.label else ''}the IVX instrument of '{name}' has nothing in common with "
            "it, so it gives no slope; choose other errors or drop the term"
        )
