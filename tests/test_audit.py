"""The audit on whole studies: every slope, R2 and error that other code can compute agrees to 1e-8."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

import carrylab

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT / "scripts"))

import open_data  # noqa: E402  a script, not a module of the package


@pytest.mark.parametrize("which", ["demo", "real"])
def test_whole_studies_agree_with_linearmodels_and_statsmodels(which: str, tmp_path: Path) -> None:
    path = ROOT / "datasets_demo" / "clean" / "study.toml" if which == "demo" else open_data.write(tmp_path)
    found = carrylab.run(carrylab.read_study(path), audit=True).audit
    assert found is not None
    quantities = {quantity for quantity, _ in found.largest()}
    assert {"slope", "const", "r2", "std_error, bartlett", "std_error, rectangular"} <= quantities
    assert len(found.comparisons) > 500
    assert max(found.largest().values()) < 1e-8
