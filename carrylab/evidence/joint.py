"""Joint hypotheses on premium shares: over groups, horizons, markets, and over everything a study estimates."""

from __future__ import annotations

from collections.abc import Sequence

from carrylab.evidence.setting import Fit, Row
from carrylab.evidence.stack import EQUAL, ZERO, Stack, distinct, equal, joint_row, stack, zero

GROUPS, HORIZONS, MARKETS, EVERYTHING = "all groups", "all horizons", "all markets", "everything"


def group_rows(fits: Sequence[Fit], kind: str = "auto") -> list[Row]:
    """Rows of section `joint` for the groups of one parity and horizon: every share zero, and all of them equal."""
    if len(fits) < 2 or not all(map(_has_share, fits)):
        return []
    place = fits[0].place()
    kept = {name: place[name] for name in ("market", "parity", "horizon", "interval")}
    return _both(stack(fits, [fit.group for fit in fits]), kind, kept | {"group": GROUPS})


def study_joint_rows(fits: Sequence[Fit], kind: str = "auto") -> list[Row]:
    """Rows of section `joint` for pooled fits: over the horizons of a parity, over markets, over everything.

    Fits of one interval are held together; those that say the same as another are left out and named.
    """
    pooled = [fit for fit in fits if fit.group == "pooled" and _has_share(fit)]
    rows = [row for own in _by(pooled, "market", "parity") for row in _over_horizons(own, kind)]
    for alike in _by(pooled, "interval", "horizon"):
        rows += _over_markets(alike, kind) + _everything(alike, kind)
    return rows


def _has_share(fit: Fit) -> bool:
    return fit.leg_of("return") is not None and fit.has_identity


def _everything(fits: Sequence[Fit], kind: str) -> list[Row]:
    """Every parity of every market at one horizon, each fact once; none where that is a single one or the markets'."""
    whole = distinct(stack(fits, [f"{fit.parity.market} {fit.parity.name}" for fit in fits]))
    if len(whole.names) < 2 or len(fits) == len({fit.parity.market for fit in fits}):
        return []
    place = {name: fits[0].place()[name] for name in ("horizon", "interval")}
    return [place | {"group": EVERYTHING, "sample": "all"} | _zero(whole, kind)]


def _by(fits: Sequence[Fit], *keys: str) -> list[list[Fit]]:
    """Fits that share some columns of their place, in the order of the first."""
    found: dict[tuple[object, ...], list[Fit]] = {}
    for fit in fits:
        found.setdefault(tuple(fit.place()[key] for key in keys), []).append(fit)
    return list(found.values())


def _zero(of: Stack, kind: str) -> Row:
    return joint_row(of, zero(of), kind, ZERO)


def _both(of: Stack, kind: str, place: Row) -> list[Row]:
    place |= {"sample": "all"}
    return [place | _zero(of, kind), place | joint_row(of, equal(of), kind, EQUAL)]


def _over_horizons(fits: Sequence[Fit], kind: str) -> list[Row]:
    """One parity at its horizons; where the maturity sets the horizon, that is over maturities."""
    if len(fits) < 2:
        return []
    place = {name: fits[0].place()[name] for name in ("market", "parity", "interval")}
    place |= {"group": HORIZONS, "sample": "all"}
    whole = stack(fits, [str(fit.parity.horizon) for fit in fits])
    # What a ratio pays grows with the horizon as less of it is carried over, so its shares cannot be equal.
    carried = fits[0].leg_of("carried over") is not None
    return [place | _zero(whole, kind)] if carried else _both(whole, kind, place)


def _over_markets(fits: Sequence[Fit], kind: str) -> list[Row]:
    """Every market's first parity at one horizon."""
    first = list({fit.parity.market: fit for fit in reversed(fits)}.values())[::-1]
    if len(first) < 2:
        return []
    place = {name: first[0].place()[name] for name in ("horizon", "interval")}
    place |= {"parity": "each market's own spread", "group": MARKETS, "sample": "all"}
    return [place | _zero(stack(first, [fit.parity.market for fit in first]), kind)]
