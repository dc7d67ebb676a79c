"""Published numbers are checked as a user would: data files and a study file in, findings out."""

from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

import carrylab
from carrylab.options import Study


@pytest.fixture
def study_of(tmp_path: Path) -> Callable[[dict[str, pd.DataFrame], str], Study]:
    """Write data files and a study file, and read the study."""

    def write(files: dict[str, pd.DataFrame], text: str) -> Study:
        for name, frame in files.items():
            frame.to_csv(tmp_path / name, index=False)
        path = tmp_path / "study.toml"
        path.write_text(text, encoding="utf-8")
        return carrylab.read_study(path)

    return write


@pytest.fixture
def findings_of(study_of: Callable[..., Study]) -> Callable[[dict[str, pd.DataFrame], str], pd.DataFrame]:
    """Run such a study and return its findings."""
    return lambda files, text: carrylab.run(study_of(files, text)).findings
