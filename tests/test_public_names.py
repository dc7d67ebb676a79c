"""What `import carrylab` offers, and that it costs nothing until it is used."""

import subprocess
import sys

import carrylab

HEAVY = {"numpy", "pandas", "scipy", "statsmodels", "linearmodels"}
LAZY = f"import sys, carrylab.cli; print(sorted({HEAVY!r} & set(sys.modules)))"


def test_the_public_names() -> None:
    assert set(carrylab.__all__) == {
        "CarrylabError",
        "DataError",
        "ExtraError",
        "InferenceError",
        "SampleError",
        "StudyError",
        "calibrate",
        "check",
        "read_study",
        "run",
    }
    assert all(hasattr(carrylab, name) for name in carrylab.__all__)


def test_every_error_is_a_carrylab_error() -> None:
    kinds = [getattr(carrylab, name) for name in carrylab.__all__ if name.endswith("Error")]
    assert all(issubclass(kind, carrylab.CarrylabError) for kind in kinds)


def test_the_command_line_loads_no_heavy_library() -> None:
    done = subprocess.run([sys.executable, "-c", LAZY], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
