"""What every market hands on: a signal, its legs, and the proof that they add up."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from carrylab.data.calendar import Calendar, Floats, Tenor, Window
from carrylab.options import Role


@dataclass(frozen=True, slots=True)
class Entity:
    """One thing followed through time. Codes that do not apply are empty."""

    name: str
    economy: str = ""
    currency: str = ""
    maturity: str = ""
    index: str = ""

    def group(self, by: str) -> str:
        """The label of this entity's group under a study's `by`."""
        return self.name if by == "entity" else str(getattr(self, by))


@dataclass(frozen=True, eq=False, slots=True)
class Leg:
    """An outcome between t and t+h, standing in the row of its origin t.

    `values` (T, N), log units over the whole horizon unless the parity says otherwise. `weight` is its weight in
    the identity (None: no identity, no share), `null` its slope when expected returns are constant (None: no
    null of its own). `one_step` holds the one-period outcomes that add up to leg - null x signal when expected
    returns are constant (for the fundamental leg of a two-leg parity: the return's, times minus the ratio of the
    weights): (T, N), standing in the row of the period *in which they fall*, or (T, N, H) by origin and step
    (step 1 at index 0). `step_weights` (H,) multiplies the outcome of each step; None means one.
    """

    name: str
    role: Role
    values: Floats
    weight: float | None = None
    null: float | None = None
    one_step: Floats | None = None
    step_weights: Floats | None = None


@dataclass(frozen=True, eq=False, slots=True)
class Parity:
    """One signal and its legs for all entities of a market at one horizon.

    `signal` (T, N) is known at t. `tolerance` bounds the identity |signal - sum of weight x leg|.
    `signal_name` is the trade's word for the signal. `notes` say which rules were used (an interpolation, a
    rolled rate, rho). `approximation_bound` bounds a leg of role approximation, after its mean is taken out.
    """

    market: str
    name: str
    horizon: Tenor
    calendar: Calendar
    window: Window
    entities: tuple[Entity, ...]
    signal_name: str
    signal: Floats
    legs: tuple[Leg, ...]
    tolerance: float = 1e-10
    approximation_bound: float | None = None
    rho: float | None = None
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Identity:
    """The largest |signal - sum of weight x leg| over the rows where all stand, and where it was seen."""

    gap: float
    entity: str
    date: str
    rows: int


def identity(parity: Parity) -> Identity | None:
    """Prove the parity's identity on its own data; None where a leg has no weight, so none is claimed."""
    if any(leg.weight is None for leg in parity.legs):
        return None
    total = sum(leg.weight * leg.values for leg in parity.legs if leg.weight is not None)
    gaps = np.abs(parity.signal - total)
    rows = int(np.isfinite(gaps).sum())
    if not rows:
        return Identity(0.0, "", "", 0)
    t, i = np.unravel_index(int(np.nanargmax(gaps)), gaps.shape)
    return Identity(float(gaps[t, i]), parity.entities[i].name, parity.calendar.label(int(t)), rows)
