"""What draws under the null say: p-values, bias, bands, and tests of many hypotheses at once."""

from __future__ import annotations

import numpy as np

from carrylab.regression.sample import Floats


def equal_tailed(statistic: Floats, draws: Floats) -> Floats:
    """Equal-tailed p-values (H,) of statistics (H,) among draws (B, H).

    p = 2 min((1 + #{t* <= t})/(B + 1), (1 + #{t* >= t})/(B + 1)), at most 1: the law of t* may be skewed.

    >>> equal_tailed(np.array([2.5]), np.array([[-1.0], [0.0], [1.0], [2.0]])).item()
    0.4
    """
    below, above = one_tailed(statistic, draws)
    return np.minimum(2.0 * np.minimum(below, above), 1.0)


def one_tailed(statistic: Floats, draws: Floats) -> tuple[Floats, Floats]:
    """p-values against a lower and against a higher value (H,): (1 + count)/(B + 1)."""
    below = (1.0 + (draws <= statistic).sum(axis=0)) / (len(draws) + 1.0)
    above = (1.0 + (draws >= statistic).sum(axis=0)) / (len(draws) + 1.0)
    return below, above


def bias_corrected(slope: Floats, draws: Floats, null: Floats) -> Floats:
    """Slopes (H,) less the mean error of the drawn slopes (B, H), whose true value is the null (H,)."""
    corrected: Floats = slope - (draws.mean(axis=0) - null)
    return corrected


def band(draws: Floats, confidence: float = 0.95) -> Floats:
    """Lower and upper end (2, H) of the equal-tailed band of a statistic under the null."""
    tail = (1.0 - confidence) / 2.0
    ends: Floats = np.quantile(draws, [tail, 1.0 - tail], axis=0)
    return ends


def upper_band(draws: Floats, confidence: float = 0.95) -> Floats:
    """The value (H,) that a statistic such as R2 exceeds under the null in 1 - confidence of samples."""
    end: Floats = np.quantile(draws, confidence, axis=0)
    return end


def interval(slope: Floats, statistic: Floats, draws: Floats, *, null: Floats, confidence: float = 0.95) -> Floats:
    """Ends (2, H) of the slopes that an equal-tailed test by t would not reject.

    With s = (b - null)/t the error on the data, it is b - s q for q the upper and lower quantile of t*. The shocks
    and the persistence stay those of the null, so it is exact for slopes near it; use t with errors that hold away
    from the null (cosines), not 1B.
    """
    return percentile_t(slope, (slope - null) / statistic, draws, confidence)


def percentile_t(slope: Floats, error: Floats, statistics: Floats, confidence: float = 0.95) -> Floats:
    """Ends (2, ...) of b - s q for errors s and the upper and lower quantile q of studentised draws (B, ...)."""
    lower, upper = band(statistics, confidence)
    return np.stack([slope - error * upper, slope - error * lower])


def uniform_reach(statistics: Floats, confidence: float = 0.95) -> float:
    """The number of standard errors that covers all H slopes at once in `confidence` of studentised draws (B, H)."""
    return float(np.quantile(np.abs(statistics).max(axis=1), confidence))


def rarity(statistic: Floats, draws: Floats) -> tuple[Floats, Floats]:
    """How far out statistics (H,) and draws (B, H) lie on one scale for all hypotheses: less the equal-tailed p.

    Each is ranked among the B + 1 values of its own hypothesis, data included, so skewed and differently scaled
    statistics compare; larger is rarer.
    """
    everything = np.vstack([statistic, draws])
    ordered, total = np.sort(everything, axis=0), len(everything)
    found = np.empty_like(everything)
    for h in range(everything.shape[1]):
        below = np.searchsorted(ordered[:, h], everything[:, h], side="right")
        above = total - np.searchsorted(ordered[:, h], everything[:, h], side="left")
        found[:, h] = -np.minimum(2.0 * np.minimum(below, above) / total, 1.0)
    return found[0], found[1:]


def stepdown(statistic: Floats, draws: Floats) -> Floats:
    """Adjusted p-values (H,) that keep the chance of any false rejection, larger statistics being more extreme.

    With t_(1) >= ... >= t_(S): p_(j) = (1 + #{b: max_{s >= j} t*_{b,(s)} >= t_(j)})/(B + 1), then the running
    maximum. Pass |t| and |t*|, or both of `rarity` where the law is skewed, as with persistent signals.
    Source: Romano and Wolf (2005, JASA 100:94; 2016, Statistics and Probability Letters 113:38).
    """
    order = np.argsort(-statistic, kind="stable")
    largest = np.maximum.accumulate(draws[:, order[::-1]], axis=1)[:, ::-1]
    raw = (1.0 + (largest >= statistic[order]).sum(axis=0)) / (len(draws) + 1.0)
    adjusted = np.empty(len(order))
    adjusted[order] = np.maximum.accumulate(raw)
    return adjusted


def joint(statistic: Floats, draws: Floats) -> float:
    """p-value of all hypotheses together by the largest statistic, larger being more extreme."""
    return float((1.0 + (draws.max(axis=1) >= statistic.max()).sum()) / (len(draws) + 1.0))
