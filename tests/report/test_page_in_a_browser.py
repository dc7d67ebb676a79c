"""The page as people meet it: audited, by keyboard alone, on a phone, without scripts, and on paper."""

from __future__ import annotations

import re
import sys
from collections.abc import Iterator
from pathlib import Path

import factory
import pytest
import worlds
from browser import FLAGS, axe_path, find_browser
from factory import BONDS, Place
from pages import HOSTILE, RECIPE, demo_page
from playwright.sync_api import Browser, Page, sync_playwright

import carrylab
from carrylab.findings import to_frame
from carrylab.report.page import report_page

SIZES = {"phone": (390, 844), "laptop": (1280, 800)}
STUDY = (
    worlds.BONDS
    + """
[evidence]
horizons = { until = "24m", every = "12m" }

[[state]]
name = "wide"
rule = "signal above its median"
"""
)
TABLE = "#market-by-market-1 table"


@pytest.fixture(scope="module")
def chromium() -> Iterator[Browser]:
    with sync_playwright() as driver:
        browser = driver.chromium.launch(executable_path=find_browser(), args=list(FLAGS))
        yield browser
        browser.close()


@pytest.fixture(scope="module")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("demo") / "report.html"
    path.write_text(demo_page(), encoding="utf-8")
    return path


@pytest.fixture(scope="module")
def bonds(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The page of one small market with a state, a profile of horizons and all figures."""
    folder = tmp_path_factory.mktemp("bonds")
    path = folder / "report.html"
    path.write_text(carrylab.run(carrylab.read_study(worlds.write(folder, STUDY, **worlds.bonds()))).page(), "utf-8")
    return path


def opened(browser: Browser, path: Path, size: str = "laptop", **options: object) -> Page:
    width, height = SIZES[size]
    context = browser.new_context(viewport={"width": width, "height": height}, **options)  # type: ignore[arg-type]
    page = context.new_page()
    page.goto(path.as_uri())
    return page


@pytest.fixture
def page(chromium: Browser, demo: Path) -> Iterator[Page]:
    found = opened(chromium, demo)
    yield found
    found.context.close()


def violations(page: Page) -> list[tuple[str, str, str]]:
    """What axe-core finds with all its rules, best practices included: rule, help and the first element."""
    page.add_script_tag(content=axe_path(sys.prefix).read_text(encoding="utf-8"))
    found = page.evaluate("axe.run()")
    assert len(found["passes"]) > 20
    return [(one["id"], one["help"], one["nodes"][0]["html"][:200]) for one in found["violations"]]


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("size", list(SIZES))
def test_the_accessibility_audit_finds_no_violation(chromium: Browser, bonds: Path, size: str, scheme: str) -> None:
    page = opened(chromium, bonds, size, color_scheme=scheme)
    assert violations(page) == []
    page.context.close()


def test_the_audit_of_the_whole_demo_finds_no_violation(page: Page) -> None:
    assert violations(page) == []


def test_the_audit_would_see_a_violation(chromium: Browser, bonds: Path) -> None:
    """A picture without words and a grey on grey are both found."""
    page = opened(chromium, bonds)
    page.evaluate("document.querySelector('figure svg').removeAttribute('aria-labelledby')")
    page.evaluate("document.querySelector('h1').style.color = '#ddd'")
    assert {"svg-img-alt", "color-contrast"} <= {rule for rule, _, _ in violations(page)}
    page.context.close()


@pytest.mark.parametrize("size", list(SIZES))
def test_nothing_is_wider_than_the_screen_and_nothing_is_fetched(chromium: Browser, demo: Path, size: str) -> None:
    page = opened(chromium, demo, size)
    asked: list[str] = []
    wrong: list[str] = []
    page.on("request", lambda request: asked.append(request.url))
    page.on("pageerror", lambda error: wrong.append(str(error)))
    page.on("console", lambda message: wrong.append(message.text))
    page.reload()
    assert page.evaluate("document.documentElement.scrollWidth") <= SIZES[size][0]
    assert asked == [demo.as_uri()]
    assert wrong == []
    page.context.close()


def test_by_keyboard_alone(page: Page) -> None:
    """Tab reaches the skip link first, then the contents; what has the focus shows it."""
    page.keyboard.press("Tab")
    assert page.evaluate("document.activeElement.textContent") == "Skip to the answer"
    assert page.evaluate("document.activeElement.getBoundingClientRect().left") >= 0
    page.keyboard.press("Enter")
    assert page.evaluate("location.hash") == "#the-answer"
    page.keyboard.press("Tab")
    assert page.evaluate("getComputedStyle(document.activeElement).outlineStyle") == "solid"
    stops = page.evaluate(
        "[...document.querySelectorAll('a, button, [role=button]')].every((one) => one.tabIndex === 0)"
    )
    assert stops


def first_column(page: Page, column: int) -> list[str]:
    return page.evaluate(
        f"[...document.querySelector('{TABLE}').tBodies].map((b) => b.rows[0].cells[{column}].textContent)"
    )


def test_heads_sort_the_rows_by_key_and_pairs_stay_together(page: Page) -> None:
    before = [float(text) for text in first_column(page, 1)]
    below = dict(
        zip(
            before,
            page.evaluate(f"[...document.querySelector('{TABLE}').tBodies].map((b) => b.rows[1].cells[1].textContent)"),
            strict=True,
        )
    )
    page.focus(f"{TABLE} thead th:nth-child(2) [role=button]")
    page.keyboard.press("Enter")
    rising = [float(text) for text in first_column(page, 1)]
    assert rising == sorted(before)
    assert page.get_attribute(f"{TABLE} thead th:nth-child(2)", "aria-sort") == "ascending"
    page.keyboard.press("Space")
    falling = [float(text) for text in first_column(page, 1)]
    assert falling == sorted(before, reverse=True)
    assert "largest first" in page.inner_text("#status")
    again = page.evaluate(f"[...document.querySelector('{TABLE}').tBodies].map((b) => b.rows[1].cells[1].textContent)")
    assert again == [below[value] for value in falling]


def test_names_of_rows_sort_the_markets(page: Page) -> None:
    def row(label: str) -> list[str]:
        return page.evaluate(
            f"[...[...document.querySelectorAll('#side-by-side-1 tr')].find((row) => "
            f"row.cells[0].textContent.trim() === '{label}').cells].slice(1).map((cell) => cell.textContent)"
        )

    assert row("paid as excess return") == ["1.31", "1.41", "0.29"]
    page.click("#side-by-side-1 [role=button]:text('paid as excess return')")
    assert row("paid as excess return") == ["0.29", "1.31", "1.41"]
    assert row("parity") == ["dividend-price", "forward-spot", "uncovered-interest"]
    heads = page.evaluate("[...document.querySelectorAll('#side-by-side-1 thead th')].map((one) => one.textContent)")
    assert heads == ["Equity indices", "Sovereign bonds", "Currencies"]


def test_a_table_is_copied_as_text(chromium: Browser, demo: Path) -> None:
    page = opened(chromium, demo, permissions=["clipboard-read", "clipboard-write"])
    page.click("#side-by-side-1 button")
    page.wait_for_function("document.getElementById('status').textContent === 'Copied'")
    lines = page.evaluate("navigator.clipboard.readText()").splitlines()
    assert lines[0] == "\tSovereign bonds\tCurrencies\tEquity indices"
    assert "paid as excess return\t1.31\t1.41\t0.29" in lines
    assert "\t(0.38)\t(0.54)\t(0.08)" in lines
    page.context.close()


def test_without_scripts_everything_is_there(chromium: Browser, demo: Path) -> None:
    page = opened(chromium, demo, "phone", java_script_enabled=False)
    assert page.locator("button, [role=button]").count() == 0
    assert page.locator("table").count() > 20
    assert page.locator("figure svg").count() > 5
    assert page.locator("#reproduction").is_visible()
    page.context.close()


def test_colours_follow_the_reader(chromium: Browser, demo: Path) -> None:
    grounds = []
    for scheme in ("light", "dark"):
        page = opened(chromium, demo, color_scheme=scheme)
        grounds.append(page.evaluate("getComputedStyle(document.body).backgroundColor"))
        page.context.close()
    assert grounds == ["rgb(253, 252, 249)", "rgb(20, 24, 28)"]


@pytest.mark.parametrize(("paper", "points", "inside"), [("A4", (595, 842), 686), ("Letter", (612, 792), 710)])
def test_it_prints_on(page: Page, paper: str, points: tuple[int, int], inside: int) -> None:
    """Sheets of the right size, every table inside the margins (pixels at 96 to the inch), heads repeated."""
    page.set_viewport_size({"width": inside, "height": 900})
    page.emulate_media(media="print")
    assert page.evaluate("getComputedStyle(document.querySelector('thead')).display") == "table-header-group"
    wide = page.evaluate(
        f"[...document.querySelectorAll('table, svg, pre')].filter((one) => "
        f"one.getBoundingClientRect().right > {inside + 1}).map((one) => one.closest('[id]').id)"
    )
    assert wide == []
    assert not page.locator(".tools").first.is_visible()
    pdf = page.pdf(format=paper)
    boxes = re.findall(rb"/MediaBox \[0 0 ([\d.]+) ([\d.]+)\]", pdf)
    assert all(abs(float(w) - points[0]) < 2 and abs(float(h) - points[1]) < 2 for w, h in boxes)
    assert 10 < len(boxes) < 60


def test_hostile_names_run_nothing(chromium: Browser, tmp_path: Path) -> None:
    market, title, file = HOSTILE
    findings = to_frame([*factory.column(Place(market, "forward-spot"), BONDS, groups=(title,)), *factory.accounts()])
    findings["leg"] = findings["leg"].where(findings["section"] != "ledger", f"spot: {file}")
    path = tmp_path / "report.html"
    path.write_text(report_page(findings, RECIPE, title=title, audit=[file]), encoding="utf-8")
    context = chromium.new_context()
    page = context.new_page()
    said: list[str] = []
    page.on("dialog", lambda dialog: (said.append(dialog.message), dialog.dismiss()))
    page.goto(path.as_uri())
    page.hover("#market-by-market-1 td")
    assert said == []
    assert page.inner_text("h1") == title
    assert market in page.inner_text("#side-by-side-1")
    context.close()
