"""True size of every kind of error in worlds where nothing is paid, written into the contributor's guide.

`python scripts/size.py` simulates every cell, tests a true null at a nominal 5% in each sample, keeps the rates in
scripts/sizes.csv and rewrites the tables between two marks in DEVELOPERS.md. Draws are made in full for every sample,
as one draw a sample hides how they fail. It ends with exit code 1 and a line for every rate on record outside its bar,
two Monte Carlo errors apart. `--only bonds` reruns the cells whose name holds these words, `--share 0.1` a tenth of the
samples. All of it takes about an hour on two cores.
"""

from __future__ import annotations

import argparse
import datetime
import os
import subprocess
import sys
import time
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path
from typing import TYPE_CHECKING

from environment import ROOT, prepare

if TYPE_CHECKING:
    from size_table import Result

GUIDE = ROOT / "DEVELOPERS.md"
RECORD = ROOT / "scripts" / "sizes.csv"
BEGIN, END = "<!-- sizes begin -->", "<!-- sizes end -->"
CHUNK = 25  # samples that a worker takes at once
THREADS = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")


def measured(pool: ProcessPoolExecutor, name: str, runs: int) -> list[Result]:
    """Rates of one cell over `runs` samples, which the workers share."""
    from collections import Counter

    from size_cells import CELLS, SEED, counted
    from size_table import Result

    cell = CELLS[name]
    parts = [(start, min(start + CHUNK, runs)) for start in range(0, runs, CHUNK)]
    rejected: Counter[tuple[str, str]] = Counter()
    made: Counter[tuple[str, str]] = Counter()
    for one, other in pool.map(counted, [name] * len(parts), *zip(*parts, strict=True), [cell.draws] * len(parts)):
        rejected.update(one)
        made.update(other)
    today = datetime.date.today().isoformat()
    return [
        Result(cell.part, row, test, round(100 * rejected[row, test] / count, 2), count, cell.draws, SEED, today)
        for (row, test), count in made.items()
    ]


def simulate(names: list[str], share: float) -> None:
    """Measure the cells one by one; what is measured is kept even where the rest is stopped."""
    from size_cells import CELLS
    from size_table import read, write

    with ProcessPoolExecutor(os.cpu_count()) as pool:
        for name in names:
            start = time.perf_counter()
            found = measured(pool, name, max(1, round(share * CELLS[name].runs)))
            write(RECORD, (read(RECORD) | {one.key: one for one in found}).values())
            rates = ", ".join(
                f"{one.row.removeprefix(CELLS[name].world)} {one.test} {one.percent:.1f}" for one in found
            )
            print(f"{name} ({time.perf_counter() - start:.0f} s): {rates}", flush=True)


def rewrite() -> list[str]:
    """Set what is on record between the marks of the guide; the lines on rates outside their bars."""
    from size_table import complaints, read, tables

    results = list(read(RECORD).values())
    before, _, rest = GUIDE.read_text(encoding="utf-8").partition(BEGIN)
    after = rest.partition(END)[2]
    GUIDE.write_text(f"{before}{BEGIN}\n{tables(results)}\n{END}{after}", encoding="utf-8", newline="\n")
    return complaints(results)


def main() -> int:
    """Simulate what is asked for, rewrite the guide, and judge everything on record."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--only", default="", help="words in the name of a cell, such as 'bonds' or 'equities, N 15'")
    parser.add_argument("--share", type=float, default=1.0, help="part of the full number of samples")
    chosen = parser.parse_args()
    os.environ.update(dict.fromkeys(THREADS, "1"))  # one thread a worker: small matrices, many samples
    from size_cells import CELLS

    names = [name for name in CELLS if chosen.only in name]
    if not names:
        parser.error(f"--only {chosen.only!r} is in the name of no cell; names are such as {next(iter(CELLS))!r}")
    simulate(names, chosen.share)
    lines = rewrite()
    print("\n".join(lines) if lines else "every rate on record is inside its bar")
    return 1 if lines else 0


if __name__ == "__main__":
    python = prepare("test")
    if Path(sys.prefix).resolve() != python.parent.parent.resolve():
        sys.exit(subprocess.run([str(python), *sys.argv], check=False).returncode)
    sys.exit(main())
