"""The proof that a parity adds up, as a line of the load checks."""

from __future__ import annotations

import numpy as np

from carrylab.data.checks import Check
from carrylab.markets.parity import Parity, identity


def identity_check(parity: Parity, file: str) -> Check:
    """Error where the identity or its stated approximation fails, else a note with the largest gap.

    `file` is the market's main data file, for the printed line.
    """
    proof = identity(parity)
    what = f"{parity.name}, {parity.horizon}"
    if proof is None:
        return Check("I1", "note", file, "", "", "", f"{what}: legs without weights", "no identity is claimed")
    entity, date = proof.entity, proof.date
    if proof.gap > parity.tolerance:
        seen = f"{what}: |signal - sum of weight x leg| is {proof.gap:.3g}, above {parity.tolerance:g}"
        advice = "check the legs' weights, units and dates, or set tolerance"
        return Check("I1", "error", file, entity, date, date, seen, advice)
    size = _approximation(parity)
    if parity.approximation_bound is not None and size > parity.approximation_bound:
        seen = (
            f"{what}: the log-linear approximation is off by up to {size:.3g}, above {parity.approximation_bound:.3g}"
        )
        advice = "check dividends against prices, or set a wider tolerance for a volatile ratio"
        return Check("I1", "error", file, "", "", "", seen, advice)
    seen = f"{what}: largest gap {proof.gap:.1e} over {proof.rows} rows"
    seen += f", approximation up to {size:.3f}" if size else ""
    return Check("I1", "note", file, entity, date, date, seen, "nothing to do")


def _approximation(parity: Parity) -> float:
    """Largest deviation of the approximation leg from its mean; zero without one."""
    found = [leg.values for leg in parity.legs if leg.role == "approximation"]
    if not found or not np.isfinite(found[0]).any():
        return 0.0
    return float(np.nanmax(np.abs(found[0] - np.nanmean(found[0]))))
