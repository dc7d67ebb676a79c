"""What the regression says today: each entity's newest signal, its fitted premium and its place in history."""

from __future__ import annotations

import numpy as np

from carrylab.evidence.setting import Fit, Row, tested
from carrylab.regression.fitted import fitted
from carrylab.regression.longrun import longrun
from carrylab.regression.sample import Floats, Ints


def latest_rows(fit: Fit, terms: Floats) -> list[Row]:
    """Rows of section `latest` for a pooled fit; `terms` (T, N, K) with holes: all signals, legs standing or not."""
    at = fit.leg_of("return")
    if at is None or fit.estimate.effects in ("time", "both"):
        return []
    newest = _newest(terms)
    entities = np.arange(terms.shape[1])
    found = fitted(fit.sample, fit.estimate, at, np.nan_to_num(terms[newest, entities]))
    run = longrun(found.influence, "cosine", lags=fit.sample.overlap)
    errors = np.sqrt(np.diag(run.covariance))
    rows = []
    for i, entity in enumerate(fit.parity.entities):
        if newest[i] < 0 or not np.isfinite(found.values[i]):
            continue
        place = fit.place() | {
            "section": "latest",
            "leg": fit.parity.legs[at].name,
            "group": entity.name,
            "first": "",
            "last": fit.parity.calendar.label(int(newest[i])),
            "n_dates": None,
            "n_entities": None,
            "n_obs": None,
        }
        signal = terms[:, i, 0]
        premium = tested(float(found.values[i]), float(errors[i]), 0.0, run.df, fit.confidence)
        rows += [
            place | {"term": "signal", "estimate": float(signal[newest[i]])},
            place | {"term": "percentile", "estimate": _percentile(signal, int(newest[i]))},
            place | {"term": "fitted premium", **premium, "method": f"equal-weighted cosines, {run.cosines} cosines"},
        ]
    return rows


def _newest(terms: Floats) -> Ints:
    """Row of the newest whole set of terms of each entity, -1 where there is none."""
    stands = np.isfinite(terms).all(axis=2)
    rows = np.arange(len(terms))[:, None]
    newest: Ints = np.where(stands, rows, -1).max(axis=0)
    return newest


def _percentile(signal: Floats, row: int) -> float:
    """Share of the entity's own signals that are at or below the newest one."""
    known = signal[np.isfinite(signal)]
    return float((known <= signal[row]).mean())
