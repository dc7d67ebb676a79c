"""Set up everything and run all checks and tests: `python scripts/test.py`."""

import sys

from browser import prepare_browser
from environment import prepare, run

if __name__ == "__main__":
    python = prepare("test")
    prepare_browser(python)
    run([python, "-m", "ruff", "check", "."])
    run([python, "-m", "ruff", "format", "--check", "."])
    run([python, "-m", "mypy"])
    run([python, "-m", "pytest", *sys.argv[1:]])
