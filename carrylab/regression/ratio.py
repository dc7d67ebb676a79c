"""Interval for a ratio of two estimates by inverting the linear restriction."""

from __future__ import annotations

import math
from dataclasses import dataclass

from carrylab.regression.sample import Floats


@dataclass(frozen=True, slots=True)
class Interval:
    """A confidence set. `kind` says its shape: an interval, the outside of an interval, or the whole line."""

    lower: float
    upper: float
    kind: str


def ratio_interval(numerator: float, denominator: float, covariance: Floats, critical: float) -> Interval:
    """All ratios theta that the test of numerator - theta x denominator = 0 does not reject.

    The set {theta: (a - theta b)^2 <= c^2 (Vaa - 2 theta Vab + theta^2 Vbb)} solves a quadratic, so it stays
    right where the denominator is close to zero and the delta method is not. `covariance` (2, 2) is that of
    (numerator, denominator). Source: Fieller (1954), J. Roy. Stat. Soc. B 16:175.
    """
    (vaa, vab), (_, vbb) = covariance
    lead = denominator**2 - critical**2 * vbb
    half = numerator * denominator - critical**2 * vab
    rest = numerator**2 - critical**2 * vaa
    root = half**2 - lead * rest
    if lead <= 0 and root <= 0:
        return Interval(-math.inf, math.inf, "whole line")
    ends = sorted(((half - math.sqrt(root)) / lead, (half + math.sqrt(root)) / lead))
    return Interval(ends[0], ends[1], "interval" if lead > 0 else "outside of the interval")
