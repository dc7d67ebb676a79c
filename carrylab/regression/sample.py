"""The sample every routine works on: dense arrays on one calendar and one mask for all legs."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]
Bools = npt.NDArray[np.bool_]


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
    `one_step`: per leg, or None.
    """

    terms: tuple[str, ...]
    legs: tuple[str, ...]
    x: Floats
    y: Floats
    mask: Bools
    steps: Ints
    overlap: int
    one_step: tuple[OneStep | None, ...]
