"""A null world with a persistent signal whose shocks move against the outcome's, as a dividend yield's do."""

import numpy as np

from carrylab.regression.sample import OneStep, Sample

from .samples import sample_of


def endogenous(rng, *, T, N=1, phi=0.985, delta=-0.9, across=0.6, slope=0.0):
    """Signal and one-period outcome (T, N); both shocks correlated `across` entities, stationary start."""
    common = rng.normal(size=(2, T, 1)) * np.sqrt(across if N > 1 else 0.0)
    v, rest = common + rng.normal(size=(2, T, N)) * np.sqrt(1 - (across if N > 1 else 0.0))
    one = delta * v + np.sqrt(1 - delta**2) * rest
    x = np.zeros((T, N))
    x[0] = v[0] / np.sqrt(1 - phi**2)
    for t in range(1, T):
        x[t] = phi * x[t - 1] + v[t]
    one[1:] += slope * x[:-1]
    return x, one


def horizon_sample(x, one, h) -> Sample:
    """Sample of the h-period sums of the outcome on the signal, with one-period outcomes."""
    total, y = np.cumsum(one, axis=0), np.full_like(one, np.nan)
    y[:-h] = total[h:] - total[:-h]
    return sample_of(x, y, OneStep(one, np.ones(h)), h)
