"""A data file written for one test, and the bare declaration of it."""

from pathlib import Path

import pytest
from declared import Put

from carrylab.options import Source


@pytest.fixture
def put(tmp_path: Path) -> Put:
    def write(content: str | bytes, name: str = "data.csv", role: str = "zero_yields") -> Source:
        path = tmp_path / name
        path.write_bytes(content.encode("utf-8") if isinstance(content, str) else content)
        return Source(role=role, path=path, file=name)

    return write
