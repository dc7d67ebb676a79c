"""Figures as files and as part of the page; the only module that imports matplotlib.

The same input gives the same bytes: no dates, one salt for the marks of an SVG, texts as outlines.
"""

from __future__ import annotations

import io
import re
import textwrap
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any

import matplotlib as mpl
from matplotlib.figure import Figure as Canvas

from carrylab.report.figure import WIDTH, Figure, Panel
from carrylab.report.looks import LIGHT

POINTS_PER_INCH = 72
PNG_DPI = 200
MARGIN, TITLE, LEADING = 6.0, 15.0, 11.0  # points around a figure that stands alone, and from line to line
STYLE: Any = {
    "font.family": "DejaVu Sans",
    "font.size": 11,
    "text.color": LIGHT["ink"],
    "text.parse_math": False,
    "axes.titlesize": 11,
    "axes.titlelocation": "left",
    "axes.titlecolor": LIGHT["ink"],
    "axes.titlepad": 5,
    "axes.labelsize": 11,
    "axes.labelcolor": LIGHT["ink"],
    "axes.edgecolor": LIGHT["soft"],
    "axes.facecolor": "none",
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.formatter.use_mathtext": False,
    "xtick.color": LIGHT["soft"],
    "ytick.color": LIGHT["soft"],
    "xtick.labelsize": 10,
    "ytick.labelsize": 10,
    "figure.facecolor": "none",
    "legend.frameon": False,
    "legend.fontsize": 10,
    "legend.handlelength": 1.8,
    "legend.columnspacing": 1.2,
    "svg.fonttype": "path",
    "pdf.fonttype": 42,
}
METADATA: dict[str, dict[str, None]] = {
    "svg": {"Date": None, "Creator": None, "Format": None, "Type": None},
    "pdf": {"CreationDate": None, "Creator": None, "Producer": None},
    "png": {"Software": None},
}


def inline_svg(panel: Panel) -> str:
    """The panel as an SVG element: colours by the names of the palette, marks that no other panel has, and its finding.

    A reader's light or dark setting then colours it; whoever cannot see it is told the finding.
    """
    text = _bytes(_drawn(panel), "svg", panel.name).decode("utf-8")
    text = text[text.index("<svg") :]
    text = re.sub(r"<!--.*?-->|<metadata>.*?</metadata>", "", text, flags=re.DOTALL)
    text = re.sub(r'(id="|href="#|url\(#)', rf"\g<1>{panel.name}-", text)
    for name, colour in LIGHT.items():
        text = text.replace(colour, f"var(--{name})")
    viewed = re.search(r'viewBox="[^"]*"', text)
    start = f'<svg {viewed[0] if viewed else ""} role="img" aria-labelledby="{panel.name}-says"'
    return re.sub(r"\s*\n\s*", "\n", re.sub(r"<svg[^>]*", start, text, count=1)).strip()


def figure_files(figures: Sequence[Figure], formats: Sequence[str]) -> Iterator[tuple[str, bytes]]:
    """Name and bytes of every panel in every format, each with its title above, and finding and source below."""
    for figure in figures:
        for panel in figure.panels:
            for kind in formats:
                yield f"{panel.name}.{kind}", _bytes(_alone(figure, panel), kind, panel.name)


def _drawn(panel: Panel) -> Canvas:
    with _style(panel.name):
        canvas = _canvas(panel.height)
        panel.draw(canvas)
    return canvas


def _alone(figure: Figure, panel: Panel) -> Canvas:
    """The panel on paper, its title above, finding and source below."""
    above = textwrap.wrap(f"{panel.title}. {figure.title}" if panel.title else figure.title, 52)
    below = [(LIGHT["ink"], textwrap.wrap(panel.finding, 74)), (LIGHT["soft"], textwrap.wrap(panel.source, 74))]
    top = TITLE * len(above) + 2 * MARGIN
    bottom = LEADING * sum(len(lines) for _, lines in below) + 2 * MARGIN
    canvas = _drawn(panel)
    with _style(panel.name):
        _grow(canvas, top, bottom)
        canvas.set_facecolor(LIGHT["paper"])
        height = panel.height + top + bottom
        canvas.text(MARGIN / WIDTH, 1 - MARGIN / height, "\n".join(above), va="top", fontsize=12, fontweight="bold")
        at = bottom - MARGIN
        for colour, lines in below:
            canvas.text(MARGIN / WIDTH, at / height, "\n".join(lines), va="top", fontsize=8.5, color=colour)
            at -= LEADING * len(lines)
    return canvas


def _grow(canvas: Canvas, top: float, bottom: float) -> None:
    """Room above and below what is drawn, in points."""
    old = canvas.get_size_inches()[1] * POINTS_PER_INCH
    new = old + top + bottom
    for ax in canvas.axes:
        box = ax.get_position(original=True)
        ax.set_position((box.x0, (box.y0 * old + bottom) / new, box.width, box.height * old / new))
    canvas.set_size_inches(WIDTH / POINTS_PER_INCH, new / POINTS_PER_INCH)


def _canvas(height: float) -> Canvas:
    return Canvas(figsize=(WIDTH / POINTS_PER_INCH, height / POINTS_PER_INCH), dpi=POINTS_PER_INCH)


@contextmanager
def _style(salt: str) -> Iterator[None]:
    with mpl.rc_context(STYLE | {"svg.hashsalt": salt}), warnings.catch_warnings():
        # A name in a script that the font lacks is drawn as boxes; the page gives it as text beside the figure.
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        yield


def _bytes(canvas: Canvas, kind: str, salt: str) -> bytes:
    held = io.BytesIO()
    with _style(salt):
        canvas.savefig(held, format=kind, dpi=PNG_DPI if kind == "png" else POINTS_PER_INCH, metadata=METADATA[kind])
    return held.getvalue()
