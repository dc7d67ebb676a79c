"""The report's own colours and marks: one palette for page and figures, in the light and in the dark."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

# One name a use; figures are drawn in the light colours, and the page swaps them by name for those of the reader.
LIGHT: Mapping[str, str] = MappingProxyType(
    {
        "paper": "#fdfcf9",
        "raised": "#f3f1ea",
        "line": "#d5d1c5",
        "soft": "#5b6168",
        "ink": "#1d2328",
        "link": "#1b4f9c",
        "paid": "#00696f",
        "true": "#b4530a",
        "carried": "#7a4fa3",
        "other": "#6a6f75",
        "state": "#e4dfd0",
    }
)
DARK: Mapping[str, str] = MappingProxyType(
    {
        "paper": "#14181c",
        "raised": "#1d2328",
        "line": "#3b434a",
        "soft": "#a9b0b6",
        "ink": "#ebe8e0",
        "link": "#8db8f2",
        "paid": "#46c2c0",
        "true": "#f2a05c",
        "carried": "#bb9be3",
        "other": "#98a0a7",
        "state": "#2b3239",
    }
)
# Every leg has a colour and a mark of its own, so that neither is needed to tell it from the others.
ROLE_COLOURS: Mapping[str, str] = MappingProxyType(
    {"return": "paid", "fundamental": "true", "carried over": "carried", "approximation": "other", "other": "other"}
)
ROLE_MARKS: Mapping[str, str] = MappingProxyType(
    {"return": "o", "fundamental": "D", "carried over": "^", "approximation": "s", "other": "v"}
)
ROLE_NAMES: Mapping[str, str] = MappingProxyType(
    {"return": "paid", "fundamental": "comes true", "carried over": "still in the price"}
)


def variables(palette: Mapping[str, str]) -> str:
    """The palette as custom properties of a style sheet."""
    return ";".join(f"--{name}:{colour}" for name, colour in palette.items())
