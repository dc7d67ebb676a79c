"""The page holds everything in order, asks for nothing from elsewhere, and shows hostile names as the text they are."""

from __future__ import annotations

import re
import subprocess
import sys
from html.parser import HTMLParser
from pathlib import Path

import factory
import pandas as pd
import pytest
import worlds
from factory import BONDS, Place
from pages import HOSTILE, RECIPE, demo_page

import carrylab
from carrylab.findings import to_frame
from carrylab.regression.covariance import ERRORS
from carrylab.report import sections
from carrylab.report.page import Recipe, report_page, slug
from carrylab.report.references import METHODS, methods_used
from carrylab.report.sections import Section
from carrylab.report.table import Line, Table, number_cell

VOID = {"meta", "br", "link", "img", "input", "hr"}


class Page(HTMLParser):
    """Elements with their attributes, texts outside scripts and styles, and whether every element is closed."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.texts: list[str] = []
        self.open: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        if self.open and self.open[-1] not in ("script", "style"):
            self.texts.append(data)

    def all(self, tag: str) -> list[dict[str, str | None]]:
        return [attributes for name, attributes in self.elements if name == tag]


@pytest.fixture(scope="module")
def three() -> str:
    return report_page(factory.three_markets(), RECIPE, title="Paid?")


@pytest.fixture(scope="module")
def bonds(tmp_path_factory: pytest.TempPathFactory) -> carrylab.Results:
    folder = tmp_path_factory.mktemp("bonds")
    return carrylab.run(carrylab.read_study(worlds.write(folder, worlds.BONDS, **worlds.bonds())))


def test_sections_stand_in_the_order_a_reader_asks(bonds: carrylab.Results) -> None:
    page = Page(bonds.page())
    assert page.open == []
    heads = [str(attributes["id"]) for attributes in page.all("h2")]
    assert heads[:3] == ["contents", "the-answer", "side-by-side"]
    assert heads.index("figures") < heads.index("market-by-market") < heads.index("load-checks")
    assert heads.index("row-ledger") < heads.index("methods")
    assert heads[-3:] == ["methods", "cautions", "reproduction"]


def test_contents_link_to_every_section_and_all_places_are_there_once(three: str) -> None:
    page = Page(three)
    places = [attributes["id"] for _, attributes in page.elements if "id" in attributes]
    assert len(places) == len(set(places))
    links = [str(attributes["href"]) for attributes in page.all("a")]
    assert {link[1:] for link in links if link.startswith("#")} <= set(places)
    assert [link for link in links if not link.startswith("#")] == ["findings.csv"]
    assert {attributes["id"] for attributes in page.all("h2")} - {"contents"} <= {link[1:] for link in links}
    named = [attributes["aria-labelledby"] for _, attributes in page.elements if "aria-labelledby" in attributes]
    assert set(named) <= set(places)


def test_the_page_asks_for_nothing_from_elsewhere(bonds: carrylab.Results) -> None:
    text = bonds.page()
    page = Page(text)
    for tag, attributes in page.elements:
        assert tag not in ("link", "img", "iframe", "object", "embed", "base", "form"), tag
        assert "src" not in attributes
        for name in ("href", "xlink:href"):
            assert attributes.get(name, "#") == "findings.csv" or str(attributes.get(name, "#")).startswith("#")
    outside = re.findall(r"(?:https?:)?//[\w.]+|@import|url\((?!#)", text)
    assert set(outside) <= {"http://www.w3.org", "//www.w3.org"}  # names of XML, which nobody fetches
    assert "default-src 'none'" in text


def test_the_answer_is_computed_and_its_numbers_are_there_in_full(three: str) -> None:
    assert "Over 12 months the spread is paid out in Sovereign bonds, Currencies and Equity indices" in three
    assert '<span class="b" title="0.834">0.83</span>' in three
    assert '<span class="n" title="0.214">0.21</span>' in three


def test_every_number_of_a_table_has_its_full_precision(three: str) -> None:
    cells = re.findall(r"<td([^>]*)>([^<]*)</td>", three)
    bare = {
        text for attributes, text in cells if "title=" not in attributes and re.fullmatch(r"[\d.,()%-]*\d\)?", text)
    }
    assert bare <= {"1996-01", "2024-12", "2025-12", "2", "0" * 64}  # dates, a version and a hash
    assert ' title="0.0134"' in three  # mean excess return, shown as 1.34


def test_hostile_names_are_shown_as_text() -> None:
    """Markets, title, files, study and audit lines with mark-up, templates and mathematics in them."""
    market, title, file = HOSTILE
    findings = to_frame([*factory.column(Place(market, "forward-spot"), BONDS, groups=(title,)), *factory.accounts()])
    findings["leg"] = findings["leg"].where(findings["section"] != "ledger", f"spot: {file}")
    recipe = Recipe(study=title, command=file, versions={market: title}, hashes={file: title}, seeds={market: 7})
    text = report_page(findings, recipe, title=title, audit=[market])
    page = Page(text)
    assert page.open == []
    assert len(page.all("script")) == 1
    assert not page.all("img") + page.all("svg")
    assert not [attributes for _, attributes in page.elements if any(name.startswith("on") for name in attributes)]
    shown = "".join(page.texts)
    for name in HOSTILE:
        assert name in shown
    assert "49" not in re.findall(r"<title>(.*?)</title>", text)[0]


def test_hostile_names_in_figures(tmp_path: Path) -> None:
    market = HOSTILE[1].replace("&", "&amp; &")
    study = worlds.BONDS.replace('name = "Bonds"', f"name = '''{market}'''")
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, study, **worlds.bonds())))
    page = Page(results.page())
    assert page.open == []
    assert len(page.all("script")) == 1
    assert not page.all("img")
    assert market in "".join(page.texts)


def test_the_same_findings_give_the_same_bytes(bonds: carrylab.Results) -> None:
    assert bonds.page() == bonds.page()


def test_a_section_that_the_text_has_stands_on_the_page_too(monkeypatch: pytest.MonkeyPatch) -> None:
    def write(_findings: pd.DataFrame) -> list[Table | str]:
        return ["A sentence.", Table("A new table", ("x",), (Line("row", (number_cell(1.25),)),))]

    monkeypatch.setattr(sections, "SECTIONS", (*sections.SECTIONS, Section("New evidence", write)))
    text = report_page(factory.three_markets(), RECIPE, title="T")
    assert '<h2 id="new-evidence">New evidence</h2>' in text
    assert "<li>A sentence.</li>" in text
    assert ">A new table</h3>" in text


def test_no_section_shares_its_place_with_another() -> None:
    titles = [section.title for section in sections.SECTIONS]
    own = {"contents", "figures", "methods", "cautions", "reproduction", "recipe", "study-file", "status"}
    places = [slug(title) for title in titles]
    assert len(set(places)) == len(places)
    assert not own & set(places)


def test_without_scripts_nothing_is_offered_that_needs_them(three: str) -> None:
    body = three.partition("<script>")[0]
    assert "<button" not in body
    assert 'role="button"' not in body


def test_methods_are_those_whose_words_the_findings_use() -> None:
    findings = factory.three_markets()
    words = {method.word for method in methods_used(findings)}
    assert {"", "forward-spot", "uncovered-interest", "dividend-price", "carry", "equal-weighted cosines"} <= words
    assert not {"yield-spread", "fixed-b", "clustered", "stepdown"} & words
    assert all(re.search(r"\(\d{4}\)", method.source) for method in METHODS)


def test_every_kind_of_error_is_named_with_its_source() -> None:
    """Textbook errors apart, which need none."""
    for name, kind in ERRORS.items():
        rows = [{"section": "shares", "term": "signal", "method": f"no effects; {kind.words}"}]
        assert len(methods_used(to_frame(rows))) > 1 or name == "classical", name


def test_a_study_without_slopes_still_makes_a_page() -> None:
    text = report_page(to_frame(factory.accounts()), RECIPE, title="T")
    assert Page(text).open == []
    assert "fx_spot.csv" in text


def test_the_text_report_needs_neither_plots_nor_templates(tmp_path: Path) -> None:
    path = worlds.write(tmp_path, worlds.BONDS, **worlds.bonds())
    script = (
        "import carrylab, sys; results = carrylab.run(carrylab.read_study(sys.argv[1])); results.report();"
        "results.save(sys.argv[2], page=False); print([name in sys.modules for name in ('matplotlib', 'jinja2')])"
    )
    command = [sys.executable, "-c", script, str(path), str(tmp_path / "out")]
    done = subprocess.run(command, capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[False, False]"
    assert not (tmp_path / "out" / "report.html").exists()


def test_the_demo_page_is_below_two_megabytes() -> None:
    assert len(demo_page().encode()) < 2e6
