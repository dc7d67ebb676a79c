"""Findings and files: a run folder is written whole or not at all, and read back exactly."""

from __future__ import annotations

import hashlib
import json
import platform
import tempfile
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from importlib import metadata
from importlib.util import find_spec
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from carrylab.errors import DataError, ExtraError
from carrylab.findings import COLUMNS, TEXTS

FORMAT = "carrylab run 1"
PACKAGES = ("carrylab", "numpy", "pandas", "scipy", "tabulate", "linearmodels", "statsmodels")
NUMBERS = tuple(name for name in COLUMNS if name not in TEXTS)
RISKY = ("=", "+", "-", "@", "\t", "\r", "\n", "\0")


@dataclass(frozen=True, eq=False, slots=True)
class Run:
    """What a run folder holds: the report, the two tables, and the account of how they were made."""

    report: str
    findings: pd.DataFrame
    panel: pd.DataFrame
    account: Mapping[str, Any]


def save(run: Run, directory: Path, *, parquet: bool) -> Path:
    """Write the run folder beside its place and rename it into place when it is whole.

    findings.parquet is written wherever pyarrow is installed; `parquet` insists on it (ExtraError).
    An older run folder of the same name is replaced; any other folder or file of that name is refused.
    """
    require_place(directory, parquet=parquet)
    try:
        return _saved(run, directory)
    except OSError as wrong:
        raise DataError(f"{directory}: cannot be written ({wrong.strerror}); name another run folder") from None


def _saved(run: Run, directory: Path) -> Path:
    directory.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(prefix=f".{directory.name}-", dir=directory.parent) as made:
        fresh = Path(made) / "run"
        fresh.mkdir()
        _write(run, fresh, parquet=_can_write_parquet())
        if directory.exists():
            directory.rename(Path(made) / "old")
        fresh.rename(directory)
    return directory


def _can_write_parquet() -> bool:
    return find_spec("pyarrow") is not None


def require_place(directory: Path, *, parquet: bool) -> None:
    """Refuse a place that is taken, and Parquet that cannot be written, before any work is done."""
    if parquet and not _can_write_parquet():
        raise ExtraError("findings.parquet needs pyarrow; install carrylab with its parquet extra")
    if not directory.exists():
        return
    if directory.is_dir() and (not any(directory.iterdir()) or _is_run(directory)):
        return
    raise DataError(f"{directory}: exists and is no run folder of carrylab; name another with --into, or move it away")


def _is_run(directory: Path) -> bool:
    try:
        return bool(json.loads((directory / "run.json").read_text(encoding="utf-8")).get("format") == FORMAT)
    except (OSError, ValueError, AttributeError):
        return False


def _write(run: Run, folder: Path, *, parquet: bool) -> None:
    (folder / "report.txt").write_text(run.report, encoding="utf-8", newline="\n")
    write_csv(run.findings, folder / "findings.csv")
    write_csv(run.panel, folder / "panel.csv")
    if parquet:
        run.findings.to_parquet(folder / "findings.parquet", index=False)
    text = json.dumps({"format": FORMAT, **run.account}, indent=2, ensure_ascii=False)
    (folder / "run.json").write_text(text + "\n", encoding="utf-8", newline="\n")


def write_csv(frame: pd.DataFrame, path: Path) -> None:
    """UTF-8, LF, shortest exact numbers; texts that a spreadsheet would take for a formula get a leading quote."""
    guarded = frame.copy()
    for name in guarded.columns:
        if not pd.api.types.is_numeric_dtype(guarded[name]):
            guarded[name] = _mapped(guarded[name], _guard)
    guarded.to_csv(path, index=False, encoding="utf-8", lineterminator="\n")


def read_findings(path: Path) -> pd.DataFrame:
    """The findings of a run folder's CSV, exactly as they were."""
    frame = pd.read_csv(path, dtype=str, keep_default_na=False, na_filter=False)
    for name in NUMBERS:
        frame[name] = np.array([float(text or "nan") for text in frame[name]])
    for name in TEXTS:
        frame[name] = _mapped(frame[name], _unguard)
    return frame


def _mapped(column: pd.Series, change: Callable[[str], str]) -> npt.NDArray[np.object_]:
    """Every text changed, each distinct one once."""
    codes, distinct = pd.factorize(column)
    return np.array([change(str(text)) for text in distinct], dtype=object)[codes]


def _guard(text: str) -> str:
    return f"'{text}" if text.startswith((*RISKY, "'")) else text


def _unguard(text: str) -> str:
    return text[1:] if text.startswith("'") else text


def hashes(paths: Iterable[Path]) -> dict[str, str]:
    """SHA-256 of each file, by name."""
    return {path.name: hashlib.sha256(path.read_bytes()).hexdigest() for path in sorted(set(paths))}


def versions() -> dict[str, str]:
    """Versions of Python and of the packages that make numbers."""
    return {"python": platform.python_version()} | {name: metadata.version(name) for name in PACKAGES}
