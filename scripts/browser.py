"""Chromium and axe-core for the tests of the page: found where they are, installed where that can be done."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import tarfile
import tempfile
from pathlib import Path

AXE_VERSION = "4.14.1"
NAMES = ("chromium", "chromium-browser", "google-chrome", "google-chrome-stable", "chrome", "msedge", "microsoft-edge")
PLACES = (
    "/Applications/Google Chrome.app/Contents/MacOS/Google Chrome",
    "/Applications/Chromium.app/Contents/MacOS/Chromium",
    r"C:\Program Files\Google\Chrome\Application\chrome.exe",
    r"C:\Program Files (x86)\Microsoft\Edge\Application\msedge.exe",
)
# Nothing is asked of the network, and root needs no sandbox of its own.
FLAGS = ("--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking")


def find_browser() -> Path | None:
    """A Chromium on this machine, or None."""
    found = next((path for name in NAMES if (path := shutil.which(name))), None)
    return Path(found) if found else next((Path(place) for place in PLACES if Path(place).is_file()), None)


def axe_path(prefix: str | Path) -> Path:
    """Where axe-core stands in the environment at `prefix`."""
    return Path(prefix) / "axe-core" / f"axe-{AXE_VERSION}.min.js"


def prepare_browser(python: Path) -> None:
    """Install what the tests of the page need; one line says what is missing where that cannot be done."""
    if find_browser() is None:
        _install_browser(python)
    place = axe_path(python.parent.parent)
    if not place.is_file():
        _install_axe(place)


def _install_browser(python: Path) -> None:
    print("Installing Chromium for the tests of the page ...", flush=True)
    if _apt("chromium") and find_browser():
        return
    if _runs([str(python), "-m", "playwright", "install", "chromium"]):
        return
    sys.exit("The tests of the page need Chromium or Chrome; install one (Debian: apt-get install chromium), run again")


def _install_axe(place: Path) -> None:
    print("Installing axe-core for the tests of the page ...", flush=True)
    npm = shutil.which("npm") or (_apt("npm") and shutil.which("npm"))
    if not npm:
        sys.exit("The tests of the page take axe-core from the npm registry; install Node.js with npm, run again")
    with tempfile.TemporaryDirectory() as folder:
        if not _runs([npm, "pack", "--silent", f"axe-core@{AXE_VERSION}", "--pack-destination", folder]):
            sys.exit(f"npm could not fetch axe-core {AXE_VERSION}, which the tests of the page need; see its message")
        (packed,) = Path(folder).glob("*.tgz")
        with tarfile.open(packed) as archive:
            member = archive.extractfile("package/axe.min.js")
            text = member.read() if member else b""
    place.parent.mkdir(parents=True, exist_ok=True)
    place.write_bytes(text)


def _apt(package: str) -> bool:
    """Whether Debian's package could be installed; only root on such a system tries."""
    if not shutil.which("apt-get") or not hasattr(os, "geteuid") or os.geteuid() != 0:
        return False
    return _runs(["apt-get", "update", "-qq"]) and _runs(["apt-get", "install", "-y", "-qq", package])


def _runs(command: list[str]) -> bool:
    return subprocess.run(command, check=False, stdout=subprocess.DEVNULL).returncode == 0
