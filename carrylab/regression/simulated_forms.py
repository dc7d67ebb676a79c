"""Variances of many simulated samples as forms in the slope that is added, with what stands in where one fails."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np

from carrylab.regression.longrun import NEGATIVE
from carrylab.regression.sample import Floats
from carrylab.regression.simulated_bias import Shift


class Found(Protocol):
    """Slopes of B samples for both legs of `Simulated`, `slope` (2, B), and the variance where the slope is b."""

    @property
    def slope(self) -> Floats:
        """The two slopes (2, B); a leg with b times the second has slope[0] + b slope[1]."""

    def variance(self, b: float) -> Floats:
        """Variance of the slope (B,) in samples to which a slope of b was added."""


def at_slope(triple: Floats, b: float) -> Floats:
    """A quadratic form (..., B) at b from its three numbers (..., 3, B): of the null, the cross term, and of b."""
    value: Floats = triple[..., 0, :] + 2.0 * b * triple[..., 1, :] + b * b * triple[..., 2, :]
    return value


@dataclass(frozen=True, eq=False, slots=True)
class Plain:
    """A variance that is one quadratic form: `triple` (3, B)."""

    slope: Floats
    triple: Floats

    def variance(self, b: float) -> Floats:
        """The form at b."""
        return at_slope(self.triple, b)


@dataclass(frozen=True, eq=False, slots=True)
class Shifted:
    """One-period errors, and what the bias of the slope is made from."""

    slope: Floats
    triple: Floats
    shift: Shift

    def variance(self, b: float) -> Floats:
        """The form at b."""
        return at_slope(self.triple, b)


@dataclass(frozen=True, eq=False, slots=True)
class TwoWay:
    """Two-way clusters: variances (J, 3, B) of all J coefficients, the signal's first, by entity, date and row."""

    slope: Floats
    entity: Floats
    date: Floats
    row: Floats

    def variance(self, b: float) -> Floats:
        """Both less rows; the larger one-way variance where that of any coefficient is not positive."""
        entity, date = at_slope(self.entity, b), at_slope(self.date, b)
        both = entity + date - at_slope(self.row, b)
        failed = both <= 0
        first = failed.argmax(axis=0)[None]
        by_entity = np.take_along_axis(entity, first, 0)[0] >= np.take_along_axis(date, first, 0)[0]
        larger: Floats = np.where(by_entity, entity[0], date[0])
        return np.asarray(np.where(failed.any(axis=0), larger, both[0]))


@dataclass(frozen=True, eq=False, slots=True)
class Lagged:
    """Two-way clusters with lags of common shocks: (J, 3, B) by entity, by date with Bartlett weights, and whole."""

    slope: Floats
    entity: Floats
    weighted: Floats
    whole: Floats

    def variance(self, b: float) -> Floats:
        """The whole; where that is not positive the larger of the two others, judged over all that are not."""
        entity, weighted, whole = (at_slope(part, b) for part in (self.entity, self.weighted, self.whole))
        failed = whole <= 0
        by_date = (weighted * failed).sum(axis=0) > (entity * failed).sum(axis=0)
        return np.asarray(np.where(failed[0], np.where(by_date, weighted[0], entity[0]), whole[0]))


@dataclass(frozen=True, eq=False, slots=True)
class Rectangular:
    """Hansen-Hodrick: `whole` (J, J, 3, B) of all coefficients, `squares` (J, 3, B) without lags, `instead` (3, B)."""

    slope: Floats
    whole: Floats
    squares: Floats
    instead: Floats

    def variance(self, b: float) -> Floats:
        """The signal's; where the matrix is not positive definite what stands in its place."""
        whole = np.moveaxis(at_slope(self.whole, b), 2, 0)
        scale = np.sqrt(at_slope(self.squares, b)).T
        scaled = whole / (scale[:, :, None] * scale[:, None])
        diagonal = np.einsum("bjj->bj", scaled)
        positive = (diagonal > 0).all(axis=1) & (np.linalg.eigvalsh(scaled)[:, 0] > NEGATIVE)
        return np.asarray(np.where(positive, whole[:, 0, 0], at_slope(self.instead, b)))
