"""Findings and files: a run folder is written whole or not at all, and read back exactly."""

from __future__ import annotations

import csv
import hashlib
import json
import platform
import re
import tempfile
from collections import Counter
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from importlib import metadata
from importlib.util import find_spec
from pathlib import Path
from typing import Any, Literal

import numpy as np
import numpy.typing as npt
import pandas as pd

from carrylab.errors import DataError, ExtraError
from carrylab.findings import COLUMNS, TEXTS

FORMAT = "carrylab run 1"
PACKAGES = ("carrylab", "numpy", "pandas", "scipy", "tabulate", "linearmodels", "statsmodels", "matplotlib", "jinja2")
NUMBERS = tuple(name for name in COLUMNS if name not in TEXTS)
FILES = ("report.txt", "report.html", "figures", "findings.csv", "findings.parquet", "panel.csv", "run.json")
FIGURE = re.compile(r"[a-z0-9-]+\.(svg|pdf|png)")
RISKY = ("=", "+", "-", "@", "\t", "\r", "\n", "\0")


@dataclass(frozen=True, eq=False, slots=True)
class Run:
    """What a run folder holds: the report, the two tables, and the account of how they were made.

    `more` are further files by name, such as report.html or figures/shares.svg; each name stands in `FILES`.
    """

    report: str
    findings: pd.DataFrame
    panel: pd.DataFrame
    account: Mapping[str, Any]
    more: Mapping[str, bytes] = field(default_factory=dict)


def save(run: Run, directory: Path, *, parquet: bool) -> Path:
    """Write the run folder beside its place and rename it into place when it is whole.

    findings.parquet is written wherever pyarrow is installed; `parquet` insists on it (ExtraError).
    An older run folder of the same name is replaced; any other folder or file of that name is refused, and so is a
    run folder that holds anything else (DataError).
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
        _put_in_place(fresh, directory, aside=Path(made) / "old")
    return directory


def _put_in_place(fresh: Path, directory: Path, *, aside: Path) -> None:
    """Rename the new folder into place; a stop or an error in between brings the old one back."""
    try:
        if directory.exists():
            directory.rename(aside)
        fresh.rename(directory)
    except BaseException:
        if aside.exists() and not directory.exists():
            aside.rename(directory)
        raise


def _can_write_parquet() -> bool:
    return find_spec("pyarrow") is not None


def require_place(directory: Path, *, parquet: bool) -> None:
    """Refuse a place that is taken, and Parquet that cannot be written, before any work is done."""
    if parquet and not _can_write_parquet():
        raise ExtraError("findings.parquet needs pyarrow; install carrylab with its parquet extra")
    if not directory.exists():
        return
    inside = [entry.name for entry in directory.iterdir()] if directory.is_dir() else [directory.name]
    if inside and not _is_run(directory):
        raise DataError(
            f"{directory}: exists and is no run folder of carrylab; name another with --into, or move it away"
        )
    # Hidden files are a file manager's own.
    others = sorted(name for name in (*inside, *_in_figures(directory)) if not _is_ours(name))
    if others:
        raise DataError(
            f"{directory}: holds {others[0]!r}, which no run wrote; move it away, or name another folder with --into"
        )


def _in_figures(directory: Path) -> list[str]:
    folder = directory / "figures"
    return [f"figures/{entry.name}" for entry in folder.iterdir()] if folder.is_dir() else []


def _is_ours(name: str) -> bool:
    own = name.removeprefix("figures/")
    return name in FILES or own.startswith(".") or (own != name and FIGURE.fullmatch(own) is not None)


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
    for name, content in run.more.items():
        (folder / name).parent.mkdir(exist_ok=True)
        (folder / name).write_bytes(content)
    text = json.dumps({"format": FORMAT, **run.account}, indent=2, ensure_ascii=False)
    (folder / "run.json").write_text(text + "\n", encoding="utf-8", newline="\n")


def write_csv(frame: pd.DataFrame, path: Path) -> None:
    """UTF-8, LF, shortest exact numbers; texts that a spreadsheet would take for a formula get a leading quote."""
    guarded = frame.copy()
    texts = [name for name in guarded.columns if not pd.api.types.is_numeric_dtype(guarded[name])]
    for name in texts:
        guarded[name] = _mapped(guarded[name], _guard)
    guarded.columns = pd.Index([_guard(str(name)) for name in guarded.columns])
    # Before Python 3.13 a lone carriage return is not quoted of itself and would end the line.
    distinct = [*guarded.columns, *(text for name in texts for text in pd.unique(guarded[_guard(str(name))]))]
    quoting: Literal[0, 2] = csv.QUOTE_NONNUMERIC if any("\r" in text for text in distinct) else csv.QUOTE_MINIMAL
    guarded.to_csv(path, index=False, encoding="utf-8", lineterminator="\n", quoting=quoting)


def read_findings(path: Path) -> pd.DataFrame:
    """The findings of a run folder's CSV, exactly as they were; DataError where the file is no such table."""
    try:
        frame = pd.read_csv(path, dtype=str, keep_default_na=False, na_filter=False)
    except (OSError, ValueError) as wrong:
        raise DataError(f"{path}: cannot be read ({wrong}); give the findings.csv of a run folder") from None
    missing = [name for name in COLUMNS if name not in frame.columns]
    if missing:
        raise DataError(f"{path}: has no column {missing[0]!r}; give the findings.csv of a run folder")
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
    """SHA-256 of each file, by name; files that share a name are told apart by their folders."""
    files = sorted(set(paths))
    shared = Counter(path.name for path in files)
    names = [path.name if shared[path.name] == 1 else path.as_posix() for path in files]
    return {name: hashlib.sha256(path.read_bytes()).hexdigest() for name, path in zip(names, files, strict=True)}


def versions() -> dict[str, str]:
    """Versions of Python and of the packages that make numbers."""
    return {"python": platform.python_version()} | {name: metadata.version(name) for name in PACKAGES}
