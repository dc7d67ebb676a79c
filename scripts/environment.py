"""Make `.venv` beside the project and install carrylab in it; standard library only."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import venv
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
VENV = ROOT / ".venv"
PYTHON = VENV / ("Scripts/python.exe" if os.name == "nt" else "bin/python")
OLDEST = (3, 11)


def prepare(extra: str = "") -> Path:
    """Make the environment with one optional extra installed, or find it made; return its Python."""
    if sys.version_info < OLDEST:
        sys.exit(f"carrylab needs Python 3.11 or newer; this is {sys.version.split()[0]}")
    mark = VENV / f"installed-{extra or 'plain'}.txt"
    wanted = hashlib.sha256((ROOT / "pyproject.toml").read_bytes() + sys.version.encode()).hexdigest()
    if PYTHON.exists() and mark.exists() and mark.read_text() == wanted:
        return PYTHON
    if not PYTHON.exists():
        print(f"Making {VENV} ...", flush=True)
        venv.create(VENV, with_pip=True, clear=VENV.exists())
    print(f"Installing carrylab{f' with its {extra} extra' if extra else ''} ...", flush=True)
    target = f"{ROOT}[{extra}]" if extra else str(ROOT)
    run([PYTHON, "-m", "pip", "install", "--quiet", "--disable-pip-version-check", "--editable", target])
    mark.write_text(wanted)
    return PYTHON


def run(command: list[str | Path]) -> None:
    """Run one command in the project's root and leave with its exit code where it fails."""
    try:
        code = subprocess.run([str(part) for part in command], cwd=ROOT, check=False).returncode
    except KeyboardInterrupt:
        sys.exit(130)
    if code:
        sys.exit(code)
