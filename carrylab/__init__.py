"""Is a price spread paid out as excess return, or does it come true in the fundamental it is about?

>>> import carrylab
>>> study = carrylab.read_study("study.toml")      # doctest: +SKIP
>>> results = carrylab.run(study)                  # doctest: +SKIP
>>> results.table()                                # doctest: +SKIP
"""

from __future__ import annotations

import os
from collections.abc import Callable
from typing import TYPE_CHECKING

from carrylab.errors import CarrylabError, DataError, ExtraError, InferenceError, SampleError, StudyError

if TYPE_CHECKING:
    from carrylab.calibration import Calibration
    from carrylab.data.checks import Check
    from carrylab.options import Study
    from carrylab.results import Results

__version__ = "0.1.0"
__all__ = [
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
]


# Thin on purpose: the heavy libraries are imported where they are used, so that --help stays instant.
def read_study(path: str | os.PathLike[str]) -> Study:
    """Read and check a study file (TOML); StudyError names every key that is not allowed."""
    from carrylab.study import read_study

    return read_study(path)


def check(study: Study) -> list[Check]:
    """Read the study's data, build its parities and return what the load checks found."""
    from carrylab.runner import check

    return check(study)


def run(study: Study, *, audit: bool = False, progress: Callable[[str], None] | None = None) -> Results:
    """Run a study: data, checks, parities, regressions, tests.

    `audit` recomputes every headline slope, R2 and error that linearmodels or statsmodels can compute.
    `progress` is called with a line of text before each long step. Errors of the load checks raise DataError.
    """
    from carrylab.runner import run

    return run(study, audit=audit, progress=progress)


def calibrate(
    study: Study,
    *,
    runs: int = 1000,
    draws: int = 0,
    seed: int = 7,
    wild: bool = False,
    progress: Callable[[str], None] | None = None,
) -> Calibration:
    """What a study's tests are worth on its own samples: true size, power, smallest share and coverage, simulated.

    `runs` samples of each regression, in which nothing is paid and then half and all of the spread; `draws` under the
    null in each of up to 200 of them, 0 for none; `wild` keeps the dates in order with a random sign each, else they
    are drawn with replacement. The same seed gives the same numbers.
    """
    from carrylab.calibration import Options, calibrate

    return calibrate(study, Options(runs, draws, seed, wild), progress)
