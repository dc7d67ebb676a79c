"""Numbers become text once, here: "1.20" stays 1.20, and nothing is ever -0.00."""

from __future__ import annotations

import math

NOTHING = "-"


def fixed(value: float, digits: int = 2) -> str:
    """A fixed number of decimals; a dash for NaN, inf for an open end.

    >>> fixed(1.2), fixed(-0.001), fixed(float("nan"))
    ('1.20', '0.00', '-')
    """
    if math.isnan(value):
        return NOTHING
    if math.isinf(value):
        return "inf" if value > 0 else "-inf"
    text = f"{value:.{digits}f}"
    return text.removeprefix("-") if float(text) == 0 else text


def digits_of(error: float, least: int = 2) -> int:
    """Decimals that show two figures of a standard error too small for `least` of them, else `least`.

    >>> digits_of(0.21), digits_of(0.0004)
    (2, 5)
    """
    if not 0 < error < 10.0**-least:
        return least
    return math.ceil(-math.log10(error)) + 1


def in_parentheses(value: float, digits: int = 2) -> str:
    """A standard error under its estimate; nothing where there is none."""
    return "" if math.isnan(value) else f"({fixed(value, digits)})"


def in_brackets(lower: float, upper: float, digits: int = 2) -> str:
    """An interval."""
    return "" if math.isnan(lower) or math.isnan(upper) else f"[{fixed(lower, digits)}, {fixed(upper, digits)}]"


def p_value(value: float) -> str:
    """Three decimals; smaller ones as <0.001.

    >>> p_value(0.04), p_value(0.0004)
    ('0.040', '<0.001')
    """
    if math.isnan(value):
        return NOTHING
    return "<0.001" if value < 0.0005 else f"{value:.3f}"


def count(value: float) -> str:
    """A whole number with thousands set apart by a comma."""
    return NOTHING if math.isnan(value) else f"{value:,.0f}"
