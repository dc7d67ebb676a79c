"""Shares of a parity: weight times slope, their sum, and the premium share of all that is resolved."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.errors import InferenceError
from carrylab.regression.sample import Floats


@dataclass(frozen=True, eq=False, slots=True)
class Quantity:
    """A number made from the signal's slopes: `value`, its `gradient` (L,) and its influence `series` (T,)."""

    value: float
    gradient: Floats
    series: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Shares:
    """One share a leg, the sums by role, and the resolved premium share."""

    legs: tuple[Quantity, ...]
    total: Quantity
    premium: Quantity
    expectation: Quantity
    carried_over: Quantity
    resolved: Quantity


def shares(slopes: Floats, series: Floats, weights: Floats, roles: Sequence[str]) -> Shares:
    """Shares from the signal's slopes (L,), their influence (T, L), the legs' weights (L,) and roles.

    share = weight x slope; resolved premium share = premium / (1 - carried over), whose gradient is
    d premium / (1 - c) + premium d c / (1 - c)^2 (delta method). The series are linear in the slopes' series, so any
    long-run sum of them is a covariance. Raises InferenceError where everything is carried over.
    """

    def sum_of(chosen: Floats) -> Quantity:
        gradient = weights * chosen
        return Quantity(float(gradient @ slopes), gradient, series @ gradient)

    def of_role(name: str) -> Quantity:
        return sum_of(np.array([role == name for role in roles], dtype=np.float64))

    premium, carried = of_role("return"), of_role("carried over")
    return Shares(
        legs=tuple(sum_of(row) for row in np.eye(len(weights))),
        total=sum_of(np.ones(len(weights))),
        premium=premium,
        expectation=of_role("fundamental"),
        carried_over=carried,
        resolved=_resolved(premium, carried, series),
    )


def _resolved(premium: Quantity, carried: Quantity, series: Floats) -> Quantity:
    rest = 1.0 - carried.value
    if rest == 0.0:
        raise InferenceError(
            "the carried-over share is exactly one: nothing is resolved at this horizon; take a longer one"
        )
    gradient = premium.gradient / rest + premium.value * carried.gradient / rest**2
    return Quantity(premium.value / rest, gradient, series @ gradient)
