"""The record of measured sizes: read, merged, judged by the bars, and set as tables for the contributor's guide."""

from __future__ import annotations

import csv
import re
from collections.abc import Iterable, Sequence
from dataclasses import astuple, dataclass, fields
from pathlib import Path

from size_bars import BARS, Bar, allowed, bars_of, outside
from size_cells import SEED
from size_measures import REFUSED

PARTS = {
    "currencies": "Currencies, rejections. Differentials (phi .97) forecast no return; N currencies, T months, h held.",
    "equities": "Equities, rejections. Log dividend yields, whose shocks correlate -.9 with returns, forecast none.",
    "bonds": "Bonds held a year, rejections. Curves of one to three roots that hold the expectations hypothesis, 3 bp "
    "of noise; N economies, n years, pooled 2 to 5 years.",
    "joint": "Joint tests that the slopes of 2, 5 or 7 horizons (1 to 18 months) or maturities (2 to 8 years) are 0, "
    "rejections.",
    "coverage": "Currencies that are forecast (R2 of a month 1%), true slopes covered by 95% intervals.",
}


@dataclass(frozen=True, slots=True)
class Result:
    """One number of the table: percent of `runs` samples with `draws` draws each (0: none), from what seed and when."""

    part: str
    row: str
    test: str
    percent: float
    runs: int
    draws: int
    seed: int
    date: str

    @property
    def key(self) -> tuple[str, str, str]:
        """What it is a measure of."""
        return self.part, self.row, self.test


def read(path: Path) -> dict[tuple[str, str, str], Result]:
    """The results on record, none where there is no file."""
    if not path.exists():
        return {}
    with path.open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    found = [
        Result(
            row["part"],
            row["row"],
            row["test"],
            float(row["percent"]),
            int(row["runs"]),
            int(row["draws"]),
            int(row["seed"]),
            row["date"],
        )
        for row in rows
    ]
    return {one.key: one for one in found}


def write(path: Path, results: Iterable[Result]) -> None:
    """Put the results on record in the order of the table."""
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow([one.name for one in fields(Result)])
        writer.writerows(astuple(one) for one in sorted(results, key=_order))


def complaints(results: Iterable[Result]) -> list[str]:
    """A line for every number outside its bar, Monte Carlo error apart, and for every bar that nothing is held to."""
    unused, lines = set(BARS), []
    for one in sorted(results, key=_order):
        bars = bars_of(*one.key)
        unused -= set(bars)
        lines += [_complaint(one, bar) for bar in bars if outside(bar, one.percent, one.runs)]
    return lines + [f"{bar.part}: no result for {bar.test} in rows '{bar.rows}'" for bar in BARS if bar in unused]


def _complaint(one: Result, bar: Bar) -> str:
    low, high = allowed(bar, one.runs)
    return (
        f"{one.part}, {one.row}: {one.test} {one.percent:.1f}% of {one.runs} samples, bar {_bar(bar)}, "
        f"{max(low, 0):.1f} to {min(high, 100):.1f} with two Monte Carlo errors"
    )


def tables(results: Sequence[Result]) -> str:
    """All parts as tables in Markdown."""
    parts = ((part, [one for one in results if one.part == part]) for part in PARTS)
    return "\n\n".join(_part(part, found) for part, found in parts if found)


def _part(part: str, results: Sequence[Result]) -> str:
    tests = list(dict.fromkeys(one.test for one in results))
    tests.sort(key=lambda test: test in ("draws", REFUSED))
    rows = sorted({one.row for one in results}, key=_natural)
    held = {(one.row, one.test): one for one in results}
    head = [
        f"**{PARTS[part]}** Seed {SEED}. Bars: {'; '.join(_bar_in_words(bar) for bar in BARS if bar.part == part)}.",
        "",
        f"| {part} | {' | '.join(tests)} | samples | date |",
        f"| --- |{' --- |' * (len(tests) + 2)}",
    ]
    for row in rows:
        own = [held.get((row, test)) for test in tests]
        made = [one for one in own if one is not None]
        shown = " | ".join("" if one is None else _shown(one) for one in own)
        head.append(f"| {row} | {shown} | {_samples(made)} | {', '.join(sorted({one.date for one in made}))} |")
    return "\n".join(head)


def _shown(one: Result) -> str:
    """The percentage, and a bar that it misses."""
    missed = [bar for bar in bars_of(*one.key) if outside(bar, one.percent, one.runs)]
    return f"{one.percent:.1f}" + "".join(f" (outside {_bar(bar)})" for bar in missed)


def _samples(made: Sequence[Result]) -> str:
    plain = sorted({one.runs for one in made if not one.draws})
    drawn = sorted({(one.runs, one.draws) for one in made if one.draws and one.test == "draws"})
    return "; ".join([*(f"{runs:,}" for runs in plain), *(f"{runs:,} of {draws} draws" for runs, draws in drawn)])


def _bar(bar: Bar) -> str:
    return f"over {bar.low:g}" if bar.high == 100 else f"{bar.low:g} to {bar.high:g}"


def _bar_in_words(bar: Bar) -> str:
    where = bar.rows.replace("\\", "").replace("$", "").rstrip(",")
    return f"{bar.test}{f' ({where})' if where else ''} {_bar(bar)}{', as it must fail' if bar.fails else ''}"


def _order(one: Result) -> tuple[int, list[str | float], bool]:
    """Parts as listed, rows by the numbers in them; tests stay as they come."""
    return list(PARTS).index(one.part), _natural(one.row), one.test in ("draws", REFUSED)


def _natural(text: str) -> list[str | float]:
    return [float(part) if number % 2 else part for number, part in enumerate(re.split(r"(\d+)", text))]
