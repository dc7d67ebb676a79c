"""The command line. Each command calls the Python interface and prints; errors are one line and exit code 2."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any, Literal

import click

from carrylab import __version__
from carrylab.errors import CarrylabError

Figures = tuple[Literal["svg", "pdf", "png"], ...]
STUDY = click.argument("study", type=click.Path(path_type=Path))


class Commands(click.Group):
    """A group that turns an expected error into its one line and a stop into exit code 130."""

    def invoke(self, ctx: click.Context) -> Any:
        """Run the command."""
        try:
            return super().invoke(ctx)
        except CarrylabError as wrong:
            click.echo(str(wrong), err=True)
            ctx.exit(2)
        except KeyboardInterrupt:
            click.echo("Stopped; nothing was written.", err=True)
            ctx.exit(130)


@click.group(cls=Commands, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="carrylab")
def main() -> None:
    """Is a price spread paid out as excess return, or does it come true in the fundamental it is about?"""
    # Draws go to workers of their own; a linear algebra library that starts threads inside each makes them wait.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    # A console that cannot show a character gets a question mark instead of a crash.
    for stream in (sys.stdout, sys.stderr):
        reconfigure: Callable[..., None] | None = getattr(stream, "reconfigure", None)
        if reconfigure:
            reconfigure(errors="replace")


@main.command()
@STUDY
def check(study: Path) -> None:
    """Read the data of STUDY and print what the load checks found; errors exit with code 2."""
    import carrylab

    found = carrylab.check(carrylab.read_study(study))
    for one in found:
        click.echo(one.line())
    count = {level: sum(one.level == level for one in found) for level in ("error", "warning", "note")}
    click.echo(", ".join(f"{n} {level}{'' if n == 1 else 's'}" for level, n in count.items()))
    if count["error"]:
        sys.exit(2)


@main.command()
@STUDY
@click.option("--into", type=click.Path(path_type=Path), help="Run folder [default: NAME_results here].")
@click.option("--audit", is_flag=True, help="Recompute the headline with linearmodels and statsmodels.")
@click.option("--parquet", is_flag=True, help="Insist on findings.parquet (written wherever pyarrow is installed).")
@click.option("--width", type=click.IntRange(60, 400), default=100, show_default=True, help="Columns of text.")
@click.option(
    "--figures", multiple=True, type=click.Choice(["svg", "pdf", "png"]), help="Figures as files too; may be repeated."
)
def run(study: Path, into: Path | None, audit: bool, parquet: bool, width: int, figures: Figures) -> None:
    """Run STUDY, print the report and write the run folder."""
    import carrylab
    from carrylab.record import require_place

    target = into or Path(f"{study.stem}_results")
    require_place(target, parquet=parquet)
    results = carrylab.run(carrylab.read_study(study), audit=audit, progress=_progress())
    results.save(target, parquet=parquet, width=width, figures=figures)
    click.echo((target / "report.txt").read_text(encoding="utf-8"))
    click.echo(f"Run folder: {target}")


@main.command()
@STUDY
@click.option("--runs", type=int, default=1000, show_default=True, help="Simulated samples of each regression.")
@click.option("--draws", type=int, default=0, help="Draws under the null in each of up to 200 samples [default: none].")
@click.option("--seed", type=int, default=7, show_default=True, help="Seed of the random numbers.")
@click.option("--wild", is_flag=True, help="Keep dates in order, a random sign each, and so times of high volatility.")
@click.option("--width", type=click.IntRange(60, 400), default=100, show_default=True, help="Columns of text.")
def calibrate(study: Path, runs: int, draws: int, seed: int, wild: bool, width: int) -> None:
    """Simulate STUDY's own samples with nothing paid: true size, power and coverage of every kind of error."""
    import carrylab

    found = carrylab.calibrate(
        carrylab.read_study(study), runs=runs, draws=draws, seed=seed, wild=wild, progress=_progress()
    )
    click.echo(found.report(width), nl=False)


def _progress() -> Callable[[str], None] | None:
    if not sys.stderr.isatty():
        return None
    return lambda step: click.echo(f"... {step}", err=True)


@main.command()
@STUDY
@click.option("--market", help="Market name [default: the first].")
@click.option("--parity", help="Parity [default: the market's first].")
@click.option("--entity", help="Entity [default: the first with a whole row].")
@click.option("--date", "date", help="Origin, such as 2010-06 [default: the last whole row].")
def show(study: Path, market: str | None, parity: str | None, entity: str | None, date: str | None) -> None:
    """Work one row of STUDY by hand: raw cells, signal, legs and their sum."""
    import carrylab
    from carrylab.show import show_row

    click.echo(show_row(carrylab.read_study(study), market=market, parity=parity, entity=entity, date=date))


@main.command()
@click.argument("files", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--study", type=click.Path(path_type=Path), default=Path("study.toml"), show_default=True)
def start(files: tuple[Path, ...], study: Path) -> None:
    """Read the heads of FILES and write a commented study with questions where only you know the answer."""
    from carrylab.start import start as begin

    if study.exists():
        raise CarrylabError(f"{study}: exists already; name another file with --study")
    text = begin(files, study)
    try:
        study.write_text(text, encoding="utf-8", newline="\n")
    except OSError as wrong:
        raise CarrylabError(f"{study}: cannot be written ({wrong.strerror}); name another file with --study") from None
    click.echo(f"Wrote {study}. Answer the lines marked 'question', then: carrylab check {study}")
