"""Everyone can read the palette: contrast in the light and in the dark, and with each kind of colour blindness."""

from __future__ import annotations

import itertools
from collections.abc import Mapping

import numpy as np
import pytest

from carrylab.report.looks import DARK, LIGHT, ROLE_COLOURS, ROLE_MARKS, ROLE_NAMES, variables

PALETTES = {"light": LIGHT, "dark": DARK}
ROLES = ("paid", "true", "carried", "other")
# Machado, Oliveira and Fernandes (2009, IEEE TVCG 15:1291), severity 1, on linear RGB; from memory.
BLIND = {
    "none": np.eye(3),
    "protan": np.array(
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]
    ),
    "deutan": np.array(
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]]
    ),
    "tritan": np.array(
        [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]]
    ),
}


def linear(colour: str) -> np.ndarray:
    """Linear RGB of a hex colour (IEC 61966-2-1)."""
    raw = np.array([int(colour[at : at + 2], 16) / 255 for at in (1, 3, 5)])
    return np.where(raw <= 0.04045, raw / 12.92, ((raw + 0.055) / 1.055) ** 2.4)


def contrast(first: str, second: str) -> float:
    """Contrast ratio of WCAG 2.2."""
    low, high = sorted(float(linear(colour) @ [0.2126, 0.7152, 0.0722]) for colour in (first, second))
    return (high + 0.05) / (low + 0.05)


def lab(rgb: np.ndarray) -> np.ndarray:
    """CIE L*a*b* of linear RGB under D65."""
    matrix = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])
    x, y, z = np.cbrt(np.maximum(matrix @ rgb / [0.9505, 1.0, 1.089], 0.0088565))
    return np.array([116 * y - 16, 500 * (x - y), 200 * (y - z)])


def test_the_contrast_of_black_on_white_is_21() -> None:
    """WCAG 2.2: the ratio runs from 1 to 21."""
    assert contrast("#000000", "#ffffff") == pytest.approx(21)


@pytest.mark.parametrize("palette", list(PALETTES))
def test_texts_and_marks_stand_out_from_the_paper(palette: str) -> None:
    """WCAG 2.2: 4.5 for text (1.4.3), 3 for marks of a figure (1.4.11)."""
    colours: Mapping[str, str] = PALETTES[palette]
    for ground in ("paper", "raised"):
        for text in ("ink", "soft", "link"):
            assert contrast(colours[text], colours[ground]) >= 4.5, (text, ground)
    for role in ROLES:
        assert contrast(colours[role], colours["paper"]) >= 3, role
        assert contrast(colours[role], colours["state"]) >= 3, role


@pytest.mark.parametrize("palette", list(PALETTES))
@pytest.mark.parametrize("kind", list(BLIND))
def test_legs_are_told_apart_by_colour(palette: str, kind: str) -> None:
    """Twelve units of L*a*b* are several times what is just noticed side by side (2.3; Mahy et al. 1994)."""
    seen = {role: lab(np.clip(BLIND[kind] @ linear(PALETTES[palette][role]), 0, 1)) for role in ROLES}
    for one, other in itertools.combinations(("paid", "true", "carried"), 2):
        assert np.linalg.norm(seen[one] - seen[other]) > 12, (one, other)


def test_legs_are_told_apart_without_colour() -> None:
    named = list(ROLE_NAMES)
    assert len({ROLE_MARKS[role] for role in named}) == len({ROLE_COLOURS[role] for role in named}) == len(named)


def test_both_palettes_name_the_same_colours_once() -> None:
    assert list(LIGHT) == list(DARK)
    assert len(set(LIGHT.values())) == len(LIGHT)
    assert variables({"ink": "#111111", "paper": "#ffffff"}) == "--ink:#111111;--paper:#ffffff"
