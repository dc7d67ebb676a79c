"""The built wheel holds all that a run needs."""

import os
import subprocess
import sys
import zipfile
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent


def test_a_run_from_the_wheel(tmp_path: Path) -> None:
    subprocess.run(
        [sys.executable, "-m", "pip", "wheel", "--quiet", "--no-deps", "--wheel-dir", tmp_path, ROOT], check=True
    )
    (wheel,) = tmp_path.glob("carrylab-*.whl")
    with zipfile.ZipFile(wheel) as packed:
        names = packed.namelist()
        packed.extractall(tmp_path / "site")
    assert not [name for name in names if name.startswith(("tests", "scripts", "datasets_demo"))]
    study = ROOT / "datasets_demo" / "clean" / "controls.toml"
    script = "import carrylab, sys; from carrylab.cli import main; print(carrylab.__file__); main(sys.argv[1:])"
    done = subprocess.run(
        [sys.executable, "-c", script, "run", study, "--into", tmp_path / "out"],
        cwd=tmp_path,
        env=os.environ | {"PYTHONPATH": str(tmp_path / "site"), "PYTHONIOENCODING": "utf-8"},
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines()[0].startswith(str(tmp_path / "site"))
    assert (tmp_path / "out" / "findings.csv").is_file()
