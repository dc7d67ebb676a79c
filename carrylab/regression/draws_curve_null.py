"""The expectations hypothesis fitted to yield curves: three roots, the factors' shocks, and fitting errors."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import product

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.draws_null import repeated_in_turn, shock_pool
from carrylab.regression.sample import Bools, Floats, Ints

SLOW = (0.965, 0.97, 0.975, 0.98, 0.985, 0.9875, 0.99, 0.9925, 0.995, 0.997, 0.9985, 0.9995)
MIDDLE = (0.88, 0.9, 0.92, 0.94, 0.95, 0.96, 0.97, 0.98)
FAST = (0.3, 0.5, 0.6, 0.7, 0.8, 0.86)
APART = 0.004  # the two slower roots; nearer ones are one root
ROOTS = np.array([roots for roots in product(FAST, MIDDLE, SLOW) if roots[2] - roots[1] >= APART - 1e-12])
LARGE_FIT = 0.0010  # ten basis points: larger fitting errors were never tried
MATTERS = 0.5  # part of the longest yield's standard deviation that a root on the edge may not move
FEWEST = 60  # dates of the state


@dataclass(frozen=True, eq=False, slots=True)
class CurveNull:
    """An expectations-consistent curve of each economy: y(n)_t = sum_j L_n(l_j) f_jt + error, f_j with root l_j.

    `roots` (N, 3). `loadings` (N, M, 3): L_n(l_j). `first` (N,) row and `start` (N, 3) factors of the first date;
    `shocks` (D, N, 3) of the factors and `errors` (D, N, M) of the yields by drawn date, each with mean zero; the
    errors of the state's own maturities are zero there and normal with `noise` (N,), the average fitting error.
    """

    roots: Floats
    loadings: Floats
    first: Ints
    start: Floats
    shocks: Floats
    errors: Floats
    noise: Floats


def average_weights(roots: Floats, maturities: Ints) -> Floats:
    """L_n(l) = (1 - l^n)/(n (1 - l)) (..., M, 3) for roots (..., 3): the mean of l^0 to l^(n-1).

    >>> average_weights(np.array([0.5]), np.array([1, 2])).ravel().tolist()
    [1.0, 0.75]
    """
    n, root = maturities[:, None], roots[..., None, :]
    weights: Floats = (1.0 - root**n) / (n * (1.0 - root))
    return weights


def state_of(maturities: Ints) -> Ints:
    """Positions of the state's maturities: the shortest, the one nearest to two fifths of the longest, the longest."""
    middle = int(np.abs(maturities[1:-1] - 0.4 * maturities[-1]).argmin()) + 1
    return np.array([0, middle, len(maturities) - 1])


def fit_curves(yields: Floats, maturities: Ints, names: Sequence[str], *, at_edge: bool = False) -> CurveNull:
    """Fit the expectations hypothesis to yields (T, N, M), NaN for holes, of maturities (M,) in periods, rising.

    The state is three of the yields, z = M f with M_mj = L_m(l_j), so z_t = A z_{t-1} + u, A = M diag(l) M^-1; the
    roots l minimise det sum u u' over a grid. Fitting errors are the residuals of the other yields on the state.
    Refused, with the economy's name, where the fit is poor or, unless `at_edge`, a slowest root that matters sits on
    the grid's edge.
    Source: Bekaert, Hodrick and Marshall (1997, JFE 44:309) and Bekaert and Hodrick (2001, JF 56:1357) for draws that
    impose the hypothesis; the roots as parameters are our own.
    """
    if len(maturities) < 4:
        raise InferenceError(
            f"draws of a curve need four maturities or more, here are {len(maturities)}; choose one-period errors"
        )
    state = state_of(maturities)
    there = np.asarray(np.isfinite(yields).all(axis=2))
    pairs = np.zeros(there.shape, dtype=np.bool_)
    pairs[1:] = there[1:] & there[:-1]
    pool = shock_pool([pairs])
    parts = [_one_curve(yields[:, i], maturities, state, (pairs[:, i], names[i])) for i in range(len(names))]
    for part, name in zip(parts, names, strict=True):
        if not at_edge:
            _refuse_edge(part.roots, part.moves, name)
    fast = np.stack([part.shocks for part in parts], axis=1)
    errors = np.stack([part.errors for part in parts], axis=1)
    fast, errors = (repeated_in_turn(values[pool], pairs[pool]) for values in (fast, errors))
    return CurveNull(
        roots=np.stack([part.roots for part in parts]),
        loadings=np.stack([average_weights(part.roots, maturities) for part in parts]),
        first=there.argmax(axis=0),
        start=np.stack([part.start for part in parts]),
        shocks=fast - fast.mean(axis=0),
        errors=errors - errors.mean(axis=0),
        noise=np.array([part.noise for part in parts]),
    )


def choose_roots(before: Floats, after: Floats, maturities: Ints) -> Floats:
    """The roots (3,) on the grid that minimise det sum u u', u = after - A before, both (n, 3) with mean zero."""
    loads = average_weights(ROOTS, maturities)
    transition = (loads * ROOTS[:, None]) @ np.linalg.inv(loads)
    both, cross, own = after.T @ after, before.T @ after, before.T @ before
    moved = transition @ cross
    left = both - moved - moved.transpose(0, 2, 1) + transition @ own @ transition.transpose(0, 2, 1)
    best: Floats = ROOTS[np.linalg.slogdet(left)[1].argmin()]
    return best


@dataclass(frozen=True, eq=False, slots=True)
class _Curve:
    """One economy: roots (3,), factors on its first date (3,), shocks (T, 3), errors (T, M), average error.

    `moves`: part of the longest yield's standard deviation that the slowest root moves.
    """

    roots: Floats
    start: Floats
    shocks: Floats
    errors: Floats
    noise: float
    moves: float


def _one_curve(yields: Floats, maturities: Ints, state: Ints, place: tuple[Bools, str]) -> _Curve:
    """Fit one economy's yields (T, M); `place` says which rows have a neighbour (T,), and its name."""
    here, name = place
    if here.sum() < FEWEST:
        raise InferenceError(
            f"{name} has {here.sum()} dates with a full curve and one before it, draws need {FEWEST}; leave it out, "
            "use fewer maturities or choose one-period errors"
        )
    level = yields - np.nanmean(yields[np.isfinite(yields).all(axis=1)], axis=0)
    z = level[:, state]
    rows = np.flatnonzero(here)
    roots = choose_roots(z[rows - 1] - z[rows - 1].mean(axis=0), z[rows] - z[rows].mean(axis=0), maturities[state])
    loads = average_weights(roots, maturities[state])
    factors = z @ np.linalg.inv(loads).T
    shocks = np.full_like(factors, np.nan)
    shocks[1:] = factors[1:] - roots * factors[:-1]
    slopes = np.linalg.lstsq(z[rows], level[rows], rcond=None)[0]
    errors = level - z @ slopes
    errors[:, state] = 0.0
    others = np.delete(errors, state, axis=1)[rows]
    noise = float(np.sqrt((others**2).sum() / (others.shape[1] * (len(rows) - z.shape[1] - 1))))
    _refuse_poor_fit(noise, name)
    moves = float(np.std(loads[-1, 2] * factors[rows, 2]) / np.std(z[rows, -1]))
    first = np.isfinite(yields).all(axis=1).argmax()
    return _Curve(roots, factors[first], shocks, errors, noise, moves)


def _refuse_edge(roots: Floats, part: float, name: str) -> None:
    """Refuse a slowest root on the edge if its factor moves the longest yield: `part` of that yield's deviation.

    A curve of fewer roots leaves one over, which may sit anywhere and moves next to nothing.
    """
    if roots[2] in (SLOW[0], SLOW[-1]) and part > MATTERS:
        raise InferenceError(
            f"{name}: the slowest root of its curve is {roots[2]}, the edge of {SLOW[0]} to {SLOW[-1]} tried, "
            f"and moves {part:.0%} of its longest yield; draws would lack its persistence, choose one-period errors"
        )


def _refuse_poor_fit(noise: float, name: str) -> None:
    if noise > LARGE_FIT:
        raise InferenceError(
            f"{name}: three factors miss its yields by {1e4 * noise:.1f} basis points, at most {1e4 * LARGE_FIT:.0f} "
            "are allowed; leave out the maturities that do not fit or choose one-period errors"
        )
