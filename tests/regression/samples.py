"""Small samples the tests of the routines are built from."""

import numpy as np

from carrylab.regression.sample import Sample, make_sample


def build(x, y, *, overlap=0, one_step=None, label="") -> Sample:
    x, y = np.asarray(x, float), np.asarray(y, float)
    return make_sample(
        x,
        y,
        terms=[f"x{k}" for k in range(x.shape[2])],
        legs=[f"y{leg}" for leg in range(y.shape[2])],
        steps=np.full(len(x), overlap + 1),
        overlap=overlap,
        one_step=one_step or [None] * y.shape[2],
        label=label,
    )


def series(x, y, **options) -> Sample:
    return build(np.asarray(x, float)[:, None, None], np.asarray(y, float)[:, None, None], **options)


def random_sample(seed=0, T=30, N=6, holes=0.25, legs=3, controls=1) -> Sample:
    rng = np.random.default_rng(seed)
    x = rng.normal(size=(T, N, 1 + controls)) + 3.0 + np.arange(N)[:, None]
    y = x[:, :, :1] * np.arange(1, legs + 1) + rng.normal(size=(T, N, legs))
    x[rng.random((T, N)) < holes] = np.nan
    y[rng.random((T, N)) < holes / 2] = np.nan
    return build(x, y)


def overlapping(seed=0, T=40, N=4, h=3, weights=None, holes=0.0):
    """A panel whose leg is the weighted sum of the next h one-period outcomes."""
    rng = np.random.default_rng(seed)
    weights = np.ones(h) if weights is None else np.asarray(weights)
    one = rng.normal(size=(T, N)) + np.arange(N)
    x = rng.normal(size=(T, N))
    x[rng.random((T, N)) < holes] = np.nan
    y = np.full((T, N), np.nan)
    for t in range(T - h):
        y[t] = weights @ one[t + 1 : t + 1 + h]
    return x, y, one, weights


def sample_of(x, y, one_step, h):
    steps = np.where(np.arange(len(x)) < len(x) - h, h, 0)
    return make_sample(
        x[:, :, None], y[:, :, None], terms=["s"], legs=["r"], steps=steps, overlap=h - 1, one_step=[one_step]
    )
