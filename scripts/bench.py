"""Performance goals, as ratios and seconds measured side by side in one run: `python scripts/bench.py`."""

from __future__ import annotations

import subprocess
import sys
import tempfile
import time
from pathlib import Path

from environment import ROOT, prepare

REPEATS = 7
STUDY = ROOT / "datasets_demo" / "clean" / "study.toml"


def best(command: list[str]) -> float:
    """Shortest wall-clock time of several runs, in seconds."""
    spent = []
    for _ in range(REPEATS):
        start = time.perf_counter()
        subprocess.run(command, check=True, capture_output=True)
        spent.append(time.perf_counter() - start)
    return min(spent)


def start_up() -> None:
    """`carrylab --help` against a bare interpreter."""
    bare = best([sys.executable, "-c", "pass"])
    help_page = best([sys.executable, "-m", "carrylab", "--help"])
    print(f"carrylab --help: {1000 * (help_page - bare):.0f} ms above python -c pass (goal 120)")


def demo_study() -> None:
    """The demo study end to end after imports, checks and run folder included."""
    import carrylab
    import carrylab.runner

    with tempfile.TemporaryDirectory() as folder:
        start = time.perf_counter()
        results = carrylab.run(carrylab.read_study(STUDY))
        results.save(Path(folder) / "run", page=False)
        print(f"demo study: {time.perf_counter() - start:.2f} s of work after imports, without the page (goal 3)")
        start = time.perf_counter()
        text = results.page()
        spent = time.perf_counter() - start
        print(
            f"its page with all figures: {spent:.2f} s after the estimates (goal 5), {len(text.encode()) / 1e6:.2f} MB"
        )


def first_figure() -> None:
    """The report's first figure against a first figure of matplotlib alone, each in a new interpreter."""
    plain = (
        "from matplotlib.figure import Figure; from matplotlib.backends.backend_svg import FigureCanvasSVG as Canvas;"
        "import io; figure = Figure(); Canvas(figure); figure.add_subplot().plot([1, 2]); figure.savefig(io.BytesIO())"
    )
    own = (
        "import carrylab.results; from carrylab.report.figure import Panel, axes_in;"
        "from carrylab.report.figures_files import inline_svg;"
        "panel = Panel('a', '', '', '', 280, lambda canvas: axes_in(canvas, (50, 40, 8, 8)).plot([1, 2]));"
        "inline_svg(panel)"
    )
    imports = best([sys.executable, "-c", "import carrylab.results"]) - best([sys.executable, "-c", "pass"])
    print(
        f"first figure: {best([sys.executable, '-c', own]) - imports:.2f} s beyond carrylab's imports, "
        f"matplotlib alone {best([sys.executable, '-c', plain]):.2f} s"
    )


def routines() -> None:
    """Regressions and covariances of the demo against a loop over PanelOLS, and peak memory."""
    from bench_routines import bench

    import carrylab
    from carrylab.runner import build, estimate

    study = carrylab.read_study(STUDY)
    fitted = [estimate(build(market, study.economies), study.economies) for market in study.markets]
    for line in bench([sample for one in fitted for _, sample in one.samples]).lines():
        print(line)


def horizons() -> None:
    """All horizons at once against PanelOLS and a textbook loop."""
    from bench_horizons import lines

    for line in lines():
        print(line)


def windows() -> None:
    """Rolling and expanding windows against loops."""
    from bench_windows import lines

    for line in lines():
        print(line)


if __name__ == "__main__":
    python = prepare("test")
    if Path(sys.prefix).resolve() != python.parent.parent.resolve():
        sys.exit(subprocess.run([str(python), __file__], check=False).returncode)
    start_up()
    demo_study()
    first_figure()
    routines()
    horizons()
    windows()
