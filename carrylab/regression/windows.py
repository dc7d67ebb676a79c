"""Slopes in every rolling or expanding window, entity effects and Driscoll-Kraay errors made anew in each."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from carrylab.errors import SampleError
from carrylab.regression.sample import Floats, Ints, Sample

CHUNK = 1 << 22  # numbers in one array of a chunk of windows
BLOCK = 64  # expanding windows that share one sum of what lies before them


@dataclass(frozen=True, eq=False, slots=True)
class Windows:
    """One row a window [start, stop) of dates: `slopes` and `std_error` (W, K) of one leg, `n_obs` (W,).

    NaN where the window cannot carry the regression.
    """

    start: Ints
    stop: Ints
    slopes: Floats
    std_error: Floats
    n_obs: Ints


@dataclass(frozen=True, eq=False, slots=True)
class _Dates:
    """Per-date features (T, F) in which every score is linear: x x', x y, and x, y and ones of each entity.

    `sums` (T + 1, F) to date; `N` entities and `K` terms say where each stands.
    """

    features: Floats
    sums: Floats
    N: int
    K: int


def rolling(sample: Sample, length: int, leg: int, *, lags: int) -> Windows:
    """Every window of `length` dates; arguments as for `expanding`."""
    T = len(sample.mask)
    if not 2 < length <= T:
        raise SampleError(f"{sample.label}: a window of {length} dates does not fit {T} dates; take 3 to {T}")
    stop = np.arange(length, T + 1)
    dates = _dates(sample, leg)
    weights, slopes, size = _solve(dates, stop - length, stop)
    meat = np.empty((len(stop), dates.K, dates.K))
    for part in _chunks(len(stop), length * dates.features.shape[1]):
        rows = np.lib.stride_tricks.sliding_window_view(dates.features, length, axis=0)[part]
        scores = np.einsum("wft,wfk->wtk", rows, weights[part], optimize=True)
        meat[part] = _moving_squares(scores, lags)
    return _windows((stop - length, stop), (slopes, meat, size), dates)


def expanding(sample: Sample, first: int, leg: int, *, lags: int) -> Windows:
    """Windows from the first date to each date from the `first`-th on, one leg on all terms with entity effects.

    With c the weights that make a date's score of its features, score_t = c' phi_t, the Bartlett sum with `lags` is
    1/(lags + 1) [ c' (sum_k m_k m_k') c + sum of the squared partial sums at the end ], m_k = phi_{k-lags} + ... +
    phi_k: one running sum serves all windows, whatever the lag.
    Errors: Driscoll and Kraay (1998, REStat 80:549) with Bartlett weights, no finite-sample factor.
    """
    T = len(sample.mask)
    if not 2 < first <= T:
        raise SampleError(
            f"{sample.label}: a first window of {first} dates does not fit a sample of {T}; take 3 to {T}"
        )
    stop = np.arange(first, T + 1)
    dates = _dates(sample, leg)
    weights, slopes, size = _solve(dates, np.zeros_like(stop), stop)
    meat = _running_squares(dates, weights, first, lags)
    return _windows((np.zeros_like(stop), stop), (slopes, meat, size), dates)


def _dates(sample: Sample, leg: int) -> _Dates:
    """Features of values less each entity's overall mean, so that levels cost no digits."""
    mask = sample.mask
    size = np.maximum(mask.sum(axis=0), 1)[:, None]
    x = (sample.x - sample.x.sum(axis=0) / size) * mask[:, :, None]
    y = sample.y[:, :, leg]
    y = (y - y.sum(axis=0) / size[:, 0]) * mask
    T, N, K = x.shape
    xx, xy = np.einsum("tik,til->tkl", x, x), np.einsum("tik,ti->tk", x, y)
    features = np.concatenate([xx.reshape(T, K * K), xy, x.reshape(T, N * K), y, mask.astype(np.float64)], axis=1)
    sums = np.concatenate([np.zeros((1, features.shape[1])), np.cumsum(features, axis=0)])
    return _Dates(features, sums, N, K)


def _split(values: Floats, N: int, K: int) -> tuple[Floats, Floats, Floats, Floats, Floats]:
    """X x' (W, K, K), x y (W, K), x (W, N, K), y (W, N) and counts (W, N) of features (W, F)."""
    at = np.cumsum([K * K, K, N * K, N])
    xx, xy, x, y, ones = np.split(values, at, axis=1)
    return xx.reshape(-1, K, K), xy, x.reshape(-1, N, K), y, ones


def _solve(dates: _Dates, start: Ints, stop: Ints) -> tuple[Floats, Floats, Ints]:
    """Weights (W, F, K) that make scores of features, slopes (W, K), and rows (W,)."""
    N, K = dates.N, dates.K
    xx, xy, x, y, count = _split(dates.sums[stop] - dates.sums[start], N, K)
    size = np.maximum(count, 1.0)
    x_mean, y_mean = x / size[:, :, None], y / size
    inside = xx - np.einsum("wik,wil->wkl", x_mean, x)
    against = xy - np.einsum("wik,wi->wk", x_mean, y)
    rows = count.sum(axis=1)
    able = (rows > K + (count > 0).sum(axis=1)) & (np.linalg.cond(inside) < 1e12)
    slopes = np.full((len(stop), K), np.nan)
    slopes[able] = np.linalg.solve(inside[able], against[able][:, :, None])[:, :, 0]
    b = np.nan_to_num(slopes)
    level = y_mean - np.einsum("wik,wk->wi", x_mean, b)
    eye = np.eye(K)
    weights = np.concatenate(
        [
            -np.einsum("wl,kj->wklj", b, eye).reshape(len(b), K * K, K),
            np.broadcast_to(eye, (len(b), K, K)),
            (np.einsum("wij,wl->wilj", x_mean, b) - level[:, :, None, None] * eye).reshape(len(b), N * K, K),
            -x_mean,
            x_mean * level[:, :, None],
        ],
        axis=1,
    )
    return weights, slopes, rows.astype(np.int64)


def _moving_squares(scores: Floats, lags: int) -> Floats:
    """Bartlett sums (W, K, K) of scores (W, n, K): squares of moving sums of the zero-padded scores."""
    sums = np.pad(np.cumsum(scores, axis=1), ((0, 0), (lags + 1, 0), (0, 0)))
    sums = np.concatenate([sums, np.repeat(sums[:, -1:], lags, axis=1)], axis=1)
    moving = sums[:, lags + 1 :] - sums[:, : -lags - 1]
    found: Floats = np.einsum("wtk,wtl->wkl", moving, moving, optimize=True) / (lags + 1)
    return found


def _running_squares(dates: _Dates, weights: Floats, first: int, lags: int) -> Floats:
    """Bartlett sums (W, K, K) of all expanding windows by one running sum of squared moving sums of features."""
    T, F = dates.features.shape
    begin = np.maximum(np.arange(1, T + 1) - lags - 1, 0)
    moving = dates.sums[1:] - dates.sums[begin]
    total, found = moving[: first - 1].T @ moving[: first - 1], np.empty((len(weights), dates.K, dates.K))
    for at in range(0, len(weights), BLOCK):
        # A window in the block has all moving sums before it, and those of the block up to its own.
        c = weights[at : at + BLOCK].transpose(0, 2, 1)
        rows = moving[first - 1 + at : first - 1 + at + len(c)]
        inside = (c.reshape(-1, F) @ rows.T).reshape(len(c), dates.K, len(c))
        inside *= np.tri(len(c))[:, None]
        before = (c.reshape(-1, F) @ total).reshape(c.shape)
        found[at : at + len(c)] = before @ c.transpose(0, 2, 1) + inside @ inside.transpose(0, 2, 1)
        total += rows.T @ rows
    stop = np.arange(first, T + 1)
    for left in range(1, lags + 1):
        # The partial sums that a window's zero padding leaves after its last date.
        end = dates.sums[stop] - dates.sums[np.maximum(stop - lags - 1 + left, 0)]
        scores = np.einsum("wf,wfk->wk", end, weights)
        found += scores[:, :, None] * scores[:, None, :]
    return found / (lags + 1)


def _windows(span: tuple[Ints, Ints], made: tuple[Floats, Floats, Ints], dates: _Dates) -> Windows:
    """Standard errors of the slopes from the meat and the moments of each window."""
    start, stop = span
    slopes, meat, size = made
    xx, _, x, _, count = _split(dates.sums[stop] - dates.sums[start], dates.N, dates.K)
    inside = xx - np.einsum("wik,wil->wkl", x / np.maximum(count, 1.0)[:, :, None], x)
    errors = np.full(slopes.shape, np.nan)
    able = np.isfinite(slopes).all(axis=1)
    bread = np.linalg.inv(inside[able])
    errors[able] = np.sqrt(np.einsum("wkk->wk", bread @ meat[able] @ bread))
    return Windows(start, stop, slopes, errors, size)


def _chunks(count: int, size: int) -> Iterator[slice]:
    width = max(1, CHUNK // size)
    return (slice(at, min(at + width, count)) for at in range(0, count, width))
