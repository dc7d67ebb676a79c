"""The sample every routine works on: dense arrays on one calendar and one mask for all legs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]
Bools = npt.NDArray[np.bool_]
Array = TypeVar("Array", Floats, Ints, Bools)


@dataclass(frozen=True, eq=False, slots=True)
class OneStep:
    """One-period outcomes of a leg, for errors imposed under the null.

    `outcomes` is (T, N) in the row of the period in which they fall, or (T, N, H) by origin and step.
    `weights` (H,) multiplies each step.
    """

    outcomes: Floats
    weights: Floats


@dataclass(frozen=True, eq=False, slots=True)
class Sample:
    """Signal, controls and legs of one regression.

    `x` (T, N, K): the signal first, then controls. `y` (T, N, L): the legs. `mask` (T, N): rows in which the
    signal, every control and every leg stand; outside it x and y are zero. `steps` (T,): periods from each
    origin to the end of its horizon, 0 where it has none. `overlap`: most origins inside one horizon, less one.
    `one_step`: per leg, or None. `standing` (N, K+L): how often each term and leg stands on its own, so that an
    empty sample can say why. `label` names the sample in messages.
    """

    terms: tuple[str, ...]
    legs: tuple[str, ...]
    x: Floats
    y: Floats
    mask: Bools
    steps: Ints
    overlap: int
    one_step: tuple[OneStep | None, ...]
    standing: Ints
    label: str = ""


def make_sample(
    x: Floats,
    y: Floats,
    *,
    terms: Sequence[str],
    legs: Sequence[str],
    steps: Ints,
    overlap: int,
    one_step: Sequence[OneStep | None],
    label: str = "",
) -> Sample:
    """One sample from arrays with NaN for holes: a row counts where the signal, every control and every leg stand.

    `x` (T, N, K), `y` (T, N, L), `steps` (T,), one entry of `one_step` per leg. The inputs are copied, and the
    arrays of the sample are read-only.
    """
    here, there = np.isfinite(x), np.isfinite(y)
    mask: Bools = np.logical_and(here.all(axis=2), there.all(axis=2))
    standing = np.concatenate([here.sum(axis=0), there.sum(axis=0)], axis=1).astype(np.int64)
    del here, there
    return Sample(
        terms=tuple(terms),
        legs=tuple(legs),
        x=_frozen(_filled(x, mask)),
        y=_frozen(_filled(y, mask)),
        mask=_frozen(mask),
        steps=_frozen(np.array(steps, dtype=np.int64)),
        overlap=int(overlap),
        one_step=tuple(one_step),
        standing=_frozen(standing),
        label=label,
    )


def take(sample: Sample, entities: Sequence[int] | Ints | Bools, *, label: str = "") -> Sample:
    """The same sample for some of its entities: column numbers, or True for those that stay."""
    columns = np.asarray(entities)
    return Sample(
        terms=sample.terms,
        legs=sample.legs,
        x=_frozen(sample.x[:, columns]),
        y=_frozen(sample.y[:, columns]),
        mask=_frozen(sample.mask[:, columns]),
        steps=sample.steps,
        overlap=sample.overlap,
        one_step=tuple(
            None if part is None else OneStep(part.outcomes[:, columns], part.weights) for part in sample.one_step
        ),
        standing=_frozen(sample.standing[columns]),
        label=label or sample.label,
    )


def _filled(values: Floats, mask: Bools) -> Floats:
    """A copy in C order with zeros outside the mask, made without a second temporary."""
    filled = np.array(values, dtype=np.float64, order="C")
    filled[~mask] = 0.0
    return filled


def _frozen(values: Array) -> Array:
    values.setflags(write=False)
    return values
