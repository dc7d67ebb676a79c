"""What every further question is asked of: one parity with its fits, and ways to fit it again."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from carrylab.data.calendar import Tenor
from carrylab.evidence.drawn import DrawnRows
from carrylab.evidence.setting import Fit, errors_of
from carrylab.markets.parity import Parity
from carrylab.regression.covariance import ErrorOptions
from carrylab.regression.fit import fit
from carrylab.regression.sample import Floats

Draw = Callable[[Sequence[Sequence[Fit]]], DrawnRows]
Rebuild = Callable[[Sequence[Tenor]], "Rebuilt"]


@dataclass(frozen=True, eq=False, slots=True)
class Labelled:
    """A state on a parity's calendar: `labels` (T,), empty where it is not known, and a `note` on when it was."""

    name: str
    labels: npt.NDArray[np.object_]
    note: str = ""


@dataclass(frozen=True, eq=False, slots=True)
class Expected:
    """A survey's expectation of leg number `leg` at each origin, `values` (T, N) in the leg's own unit with holes."""

    leg: int
    values: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Curve:
    """Log zero yields per year (T, E, M) of some economies at the `tenors` a bond parity rests on."""

    economies: tuple[str, ...]
    tenors: tuple[Tenor, ...]
    yields: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Rebuilt:
    """One parity at other horizons: a case for each that can be built, and why each other one cannot."""

    cases: tuple[Case, ...]
    refused: tuple[tuple[Tenor, str], ...]


@dataclass(frozen=True, eq=False, slots=True)
class Case:
    """One parity of one market at one horizon.

    `fits`: the pooled fit first, then one a group. `terms` (T, N, K): signal and added predictors with their holes,
    as known at each origin. `errors` as the study chose them. `at_horizons` builds the same parity at other horizons
    from the same data, each with its pooled fit alone. `draw` makes draws under the null for families of its
    fits. `states` are those of the study, `surveys` those of the market, on the parity's calendar; `curve` the
    yields of a forward-spot parity.
    """

    parity: Parity
    fits: tuple[Fit, ...]
    terms: Floats
    errors: ErrorOptions
    at_horizons: Rebuild
    draw: Draw
    states: tuple[Labelled, ...] = ()
    surveys: tuple[Expected, ...] = ()
    curve: Curve | None = None

    @property
    def pooled(self) -> Fit:
        """The pooled fit."""
        return self.fits[0]


def weighted(one: Fit, weights: Floats, errors: ErrorOptions, name: str) -> Fit:
    """The same regression under date weights (T,): a state, a window or a subsample, with its own errors.

    Raises SampleError where these dates cannot carry it.
    """
    found = fit(one.sample, effects=one.estimate.effects, weights=weights)
    return replace(one, estimate=found, errors=errors_of(one.parity, one.sample, found, errors), name=name)
