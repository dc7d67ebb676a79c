"""The proof that a parity adds up, as a line of the load checks."""

from __future__ import annotations

import numpy as np

from carrylab.data.checks import Check
from carrylab.markets.parity import Parity, identity


def identity_check(parity: Parity) -> Check:
    """Error where the identity or its stated approximation fails, else a note with the largest gap."""
    series = f"{parity.name}, {parity.horizon}"
    proof = identity(parity)
    if proof is None:
        return Check(
            "I1", "note", "", f"{parity.market}: {series}", "", "", "legs without weights", "no identity is claimed"
        )
    where = (proof.date, proof.date)
    if proof.gap > parity.tolerance:
        seen = f"|signal - sum of weight x leg| is {proof.gap:.3g} at {proof.entity}, above {parity.tolerance:g}"
        advice = "check the legs' weights, units and dates, or set tolerance"
        return Check("I1", "error", "", f"{parity.market}: {series}", *where, seen, advice)
    size = _approximation(parity)
    if parity.approximation_bound is not None and size > parity.approximation_bound:
        seen = f"the log-linear approximation is off by up to {size:.3g}, above {parity.approximation_bound:.3g}"
        advice = "check dividends against prices, or set a wider tolerance for a volatile ratio"
        return Check("I1", "error", "", f"{parity.market}: {series}", "", "", seen, advice)
    seen = f"largest gap {proof.gap:.1e} over {proof.rows} rows" + (f", approximation up to {size:.3f}" if size else "")
    return Check("I1", "note", "", f"{parity.market}: {series}", *where, seen, "nothing to do")


def _approximation(parity: Parity) -> float:
    """Largest deviation of the approximation leg from its mean; zero without one."""
    found = [leg.values for leg in parity.legs if leg.role == "approximation"]
    if not found or not np.isfinite(found[0]).any():
        return 0.0
    return float(np.nanmax(np.abs(found[0] - np.nanmean(found[0]))))
