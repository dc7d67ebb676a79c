"""What tests of the page share: a recipe, names that try to break out of the page, and the whole demo."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import carrylab
from carrylab.report.page import Recipe

ROOT = Path(__file__).resolve().parents[2]
RECIPE = Recipe(
    study='title = "T"\n', command="carrylab run s.toml", versions={"numpy": "2"}, hashes={"a.csv": "0" * 64}, seeds={}
)
HOSTILE = (
    '</title><script>alert(1)</script>"onmouseover=x',
    "<img src=x onerror=alert(1)> & {{ 7*7 }}",
    "';]]>--><svg onload=alert(1)> $x^2$ \\alpha",
)


@cache
def demo_page() -> str:
    """The page of the demo study."""
    return carrylab.run(carrylab.read_study(ROOT / "datasets_demo" / "clean" / "study.toml")).page()
