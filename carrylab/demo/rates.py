"""Interest rates of the demo world: three factors per economy, zero curves and deposits.

Curves have Nelson and Siegel (1987) loadings, so every maturity from 1 to 120 months stands and the bond
identities hold exactly. The level falls when the curve is steep, so long bonds pay their spread out.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.signal import lfilter

from carrylab.data.calendar import Tenor, add
from carrylab.demo.economies import CODES, ECONOMIES

Floats = npt.NDArray[np.float64]
Days = npt.NDArray[np.datetime64]

BURN = 1200  # months drawn and thrown away, so that the first one comes from the long-run law
MATURITIES = np.arange(1, 121)  # months
TENORS = (1, 3, 12)  # months, of deposits and forwards
DECAY = 0.7  # of the loadings, per year
FEEDBACK = 0.012
PHI = np.array([[0.994, FEEDBACK, 0.0], [0.0, 0.985, 0.0], [0.0, 0.0, 0.955]])
SHOCK = np.array([0.0014, 0.0026, 0.0026])  # sd a month of level, slope and curvature at scale 1
COMMON = 0.6  # share of a shock's variance that all economies have in common
SCALE = np.array([economy.scale for economy in ECONOMIES])
SHORT = np.array([economy.short for economy in ECONOMIES])
MEAN = SHORT[:, None] * [1.0, 0.0, 0.0] + SCALE[:, None] * [0.020, -0.020, -0.005]  # factors, (N, 3)
BANK_SPREAD = 0.001  # of deposits over the zero curve
DAYS_A_YEAR = 365.25


def loadings(months: npt.ArrayLike) -> Floats:
    """What level, slope and curvature add to zero yields of these maturities, (M, 3)."""
    x = DECAY * np.asarray(months, dtype=float) / 12
    slope = -np.expm1(-x) / x
    return np.stack([np.ones_like(x), slope, slope - np.exp(-x)], axis=-1)


def autoregression(phi: float, shock: Floats) -> Floats:
    """x_t = phi x_(t-1) + shock_t along the first axis, from zero."""
    path: Floats = lfilter([1.0], [1.0, -phi], shock, axis=0)
    return path


def factors(rng: np.random.Generator, months: int) -> Floats:
    """Level, slope and curvature less their means, (T, N, 3)."""
    T = BURN + months
    common = rng.standard_normal((T, 1, 3))
    own = rng.standard_normal((T, len(CODES), 3))
    shock = (np.sqrt(COMMON) * common + np.sqrt(1 - COMMON) * own) * SHOCK * SCALE[:, None]
    slope, curvature = (autoregression(PHI[k, k], shock[..., k]) for k in (1, 2))
    push = shock[..., 0]
    push[1:] += FEEDBACK * slope[:-1]
    level = autoregression(PHI[0, 0], push)
    return np.stack([level, slope, curvature], axis=-1)[BURN:]


def curves(rng: np.random.Generator, months: int) -> Floats:
    """Continuous zero yields of 1 to 120 months, (T, N, 120)."""
    zero: Floats = (MEAN + factors(rng, months)) @ loadings(MATURITIES).T
    return zero


def accrual_days(dates: Days) -> Floats:
    """Days from each date to the end of each tenor, (T, 3)."""
    ends = np.stack([add(dates, Tenor(months=tenor)) for tenor in TENORS], axis=1)
    return (ends - dates[:, None]).astype("timedelta64[D]").astype(np.float64)


def deposit_growth(zero: Floats, dates: Days) -> Floats:
    """Log growth of a deposit over 1, 3 and 12 months, (T, N, 3): the zero curve and a spread, day by day."""
    at = [tenor - 1 for tenor in TENORS]
    return (zero[:, :, at] + BANK_SPREAD) * accrual_days(dates)[:, None] / DAYS_A_YEAR
