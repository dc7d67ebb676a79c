"""The report as one self-contained page, in the order a reader asks; jinja2 escapes every text."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import pandas as pd
from jinja2 import Environment, FileSystemLoader, StrictUndefined, Template
from markupsafe import Markup

from carrylab.report.answer import Sentence, answer
from carrylab.report.figure import Figure, Panel
from carrylab.report.looks import DARK, LIGHT, variables
from carrylab.report.page_table import Sheet, Shown, exact, sheet
from carrylab.report.references import methods_used
from carrylab.report.sections import ANSWER, CAUTIONS_HEAD, DETAIL, Part, parts_of
from carrylab.report.side_by_side import columns_of
from carrylab.report.table import Line, Table, word_cell

ASSETS = Path(__file__).parent / "assets"


@dataclass(frozen=True, eq=False, slots=True)
class Recipe:
    """What another person needs for the same numbers: study and command, versions, SHA-256 of files, seeds."""

    study: str
    command: str
    versions: Mapping[str, str]
    hashes: Mapping[str, str]
    seeds: Mapping[str, int]


@dataclass(frozen=True, slots=True)
class Placed:
    """A table and its place on the page."""

    id: str
    sheet: Sheet


@dataclass(frozen=True, slots=True)
class PagePart:
    """A section: its place, title, sentences and tables."""

    id: str
    title: str
    lines: tuple[str, ...] = ()
    sheets: tuple[Placed, ...] = ()


@dataclass(frozen=True, eq=False, slots=True)
class Shot:
    """A panel drawn for the page."""

    panel: Panel
    svg: Markup


@dataclass(frozen=True, eq=False, slots=True)
class Group:
    """A figure with its panels as drawn."""

    figure: Figure
    shots: tuple[Shot, ...]


def report_page(
    findings: pd.DataFrame, recipe: Recipe, *, title: str, audit: Iterable[str] = (), figures: Sequence[Figure] = ()
) -> str:
    """The whole page as HTML text."""
    parts = parts_of(findings, audit)
    own = [part for part in parts if part.title not in (ANSWER, CAUTIONS_HEAD)]
    first = next((at for at, part in enumerate(own) if part.title == DETAIL), len(own))
    before, after = _placed(own[:first]), _placed(own[first:])
    (cautions,) = _placed([part for part in parts if part.title == CAUTIONS_HEAD])
    ends = [PagePart("methods", "Methods"), cautions, PagePart("reproduction", "Reproduction")]
    drawn = _groups(figures)
    shown = [PagePart("figures", "Figures")] if drawn else []
    return _template().render(
        title=title,
        span=_span(findings),
        light=Markup(variables(LIGHT)),
        dark=Markup(variables(DARK)),
        style=_asset("page.css"),
        script=_asset("page.js"),
        answer=[_sentence(found) for found in answer(findings)],
        contents=[
            PagePart("the-answer", ANSWER),
            *before,
            *shown,
            *after,
            *ends,
        ],
        before=before,
        figures=drawn,
        after=after,
        methods=methods_used(findings),
        cautions=cautions,
        recipe=_recipe(recipe),
    )


def _groups(figures: Sequence[Figure]) -> list[Group]:
    """Every panel as SVG; matplotlib is imported only where there is one."""
    if not figures:
        return []
    from carrylab.report.figures_files import inline_svg

    return [
        Group(figure, tuple(Shot(panel, Markup(inline_svg(panel))) for panel in figure.panels)) for figure in figures
    ]


@cache
def _template() -> Template:
    found = Environment(
        loader=FileSystemLoader(ASSETS),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    return found.get_template("page.html")


def _asset(name: str) -> Markup:
    return Markup((ASSETS / name).read_text(encoding="utf-8"))


def _placed(parts: Sequence[Part]) -> list[PagePart]:
    return [_part(part) for part in parts]


def _part(part: Part) -> PagePart:
    place = slug(part.title)
    tables = [piece for piece in part.pieces if isinstance(piece, Table)]
    lines = tuple(piece for piece in part.pieces if isinstance(piece, str))
    return PagePart(place, part.title, lines, tuple(_sheets(place, tables)))


def _sheets(place: str, tables: Iterable[Table]) -> Iterator[Placed]:
    for number, table in enumerate(tables, 1):
        yield Placed(f"{place}-{number}", sheet(table))


def slug(text: str) -> str:
    """A text as an anchor: `Newest signals` is newest-signals."""
    return re.sub(r"[^a-z0-9]+", "-", text.lower()).strip("-")


def _sentence(found: Sentence) -> list[str | Shown]:
    """Words and numbers; numbers outside parentheses are the answer and stand out."""
    shown: list[str | Shown] = []
    inside = 0
    for part in found:
        if isinstance(part, str):
            inside += part.count("(") - part.count(")")
            shown.append(part)
        else:
            shown.append(Shown(part.text, exact(part), "" if inside else "b", ""))
    return shown


def _span(findings: pd.DataFrame) -> str:
    """Markets, horizons and dates in one line under the title."""
    columns = columns_of(findings)
    if not columns:
        return ""
    rows = pd.concat([column.rows.iloc[:1] for column in columns])
    horizons = ", ".join(dict.fromkeys(f"{row['horizon']} ahead by {row['interval']}" for _, row in rows.iterrows()))
    dates = ", ".join(dict.fromkeys(f"{row['first']} to {row['last']}" for _, row in rows.iterrows()))
    return f"{', '.join(column.market for column in columns)}. {horizons}, origins {dates}."


def _recipe(recipe: Recipe) -> dict[str, object]:
    tables = [
        _words("Versions", "package", recipe.versions),
        _words("Data files as read", "file", recipe.hashes, "SHA-256"),
        _words("Seeds of the draws", "market", {name: str(seed) for name, seed in recipe.seeds.items()}, "seed"),
    ]
    return {
        "command": recipe.command,
        "study": recipe.study,
        "sheets": list(_sheets("recipe", [table for table in tables if table.lines])),
    }


def _words(title: str, corner: str, pairs: Mapping[str, str], head: str = "version") -> Table:
    return Table(title, (head,), tuple(Line(name, (word_cell(text),)) for name, text in pairs.items()), corner=corner)
