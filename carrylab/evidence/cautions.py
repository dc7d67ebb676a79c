"""Sentences a truthful report owes its reader: what weakens the test of one fit, with its numbers."""

from __future__ import annotations

from collections.abc import Iterator

from carrylab.evidence.setting import Fit
from carrylab.regression.bias import LARGE_BIAS, Bias, effective_entities

CLOSE_TO_A_RANDOM_WALK = 3.0  # T (1 - phi) below which the instrument itself rejects 7 to 8% in our simulated panels


def cautions(fit: Fit) -> Iterator[str]:
    """Every caution on the return leg's test; none where there is no return leg."""
    at, bias = fit.leg_of("return"), fit.errors.bias
    if at is None or bias is None:
        return
    yield from _of_bias(fit, bias)
    yield from _of_entities(fit, at)
    if fit.parity.entities[0].maturity:
        yield (
            "noise in yields stands on both sides of the regression and pushes the slope up (3 basis points: by .01 to "
            ".07 in our simulations); tests against zero do not know it, draws of whole curves do"
        )


def _of_bias(fit: Fit, bias: Bias) -> Iterator[str]:
    if bias.problem:
        yield bias.problem
    if abs(bias.ratio) >= LARGE_BIAS:
        yield (
            f"the signal is persistent and its shocks move with returns: bias is {bias.ratio:+.1f} standard errors, so "
            f"a nominal 5% test by least squares with 1B rejects about {bias.size:.0%} of true nulls"
        )
    if bias.capped:
        yield "the signal's persistence sits at its cap of .999: close to a random walk"
    slack = fit.estimate.n_obs / fit.estimate.n_entities * (1.0 - bias.persistence)
    if fit.estimate.n_entities > 1 and slack < CLOSE_TO_A_RANDOM_WALK and "instrument" in fit.errors.test.kinds:
        yield (
            f"T (1 - persistence) is {slack:.1f}: that close to a random walk the instrument too rejects 7 to 8% of "
            "true nulls at a nominal 5%; draws under the null hold"
        )


def _of_entities(fit: Fit, at: int) -> Iterator[str]:
    """Entities that share shocks: quotes against one home currency do so by construction."""
    first, count = fit.parity.entities[0], fit.estimate.n_entities
    if first.currency and not (first.maturity or first.index) and count > 1:
        together = effective_entities(fit.sample, fit.estimate, at)
        yield (
            f"all {count} currencies are quoted against one home currency and share its shocks: together they are as "
            f"good as {together:.1f} independent ones"
        )
