"""Figures: what each says, where none is drawn, and files that are the same bytes for the same input."""

from __future__ import annotations

import hashlib
import io
import os
import re
import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from xml.etree import ElementTree

import factory
import numpy as np
import pytest
import worlds
from factory import BONDS, CURRENCIES, Place
from PIL import Image

import carrylab
from carrylab.evidence.case import Labelled
from carrylab.evidence.pictures import picture_of
from carrylab.findings import to_frame
from carrylab.report.figure import WIDTH, Figure, Panel
from carrylab.report.figures import figures_of
from carrylab.report.figures_files import PNG_DPI, figure_files, inline_svg
from carrylab.report.figures_horizons import BAND, profile_of, rows_of
from carrylab.report.figures_shares import shares_of
from carrylab.report.looks import LIGHT
from carrylab.report.side_by_side import columns_of

ROOT = Path(__file__).resolve().parents[2]
SVG = "{http://www.w3.org/2000/svg}"


@pytest.fixture(scope="module")
def bonds(tmp_path_factory: pytest.TempPathFactory) -> carrylab.Results:
    folder = tmp_path_factory.mktemp("bonds")
    return carrylab.run(carrylab.read_study(worlds.write(folder, worlds.BONDS, **worlds.bonds())))


@pytest.fixture(scope="module")
def panels(bonds: carrylab.Results) -> dict[str, Panel]:
    return {panel.name: panel for figure in bonds.figures() for panel in figure.panels}


def test_every_figure_says_what_it_shows_and_where_it_comes_from(bonds: carrylab.Results) -> None:
    figures = bonds.figures()
    assert [figure.name for figure in figures] == ["shares", "path", "points"]
    for figure in figures:
        assert figure.title
        assert figure.reads
        for panel in figure.panels:
            assert re.search(r"\d", panel.finding), panel.name
            assert "Data: yields.csv. Sample: origins 2000-01 to" in panel.source


def test_shares_and_nulls_are_those_of_the_findings() -> None:
    """A foreign appreciation of weight -1 and null -1 is a share whose null is one."""
    bonds, currencies, equities = columns_of(factory.three_markets())
    paid, true = shares_of(currencies)
    assert (paid.value, paid.null, true.null) == (1.62, 0, 1)
    assert true.value == pytest.approx(-0.62)
    assert [share.seen for share in (paid, true)] == [True, False]
    several = shares_of(equities)
    assert [share.role for share in several] == ["return", "fundamental", "carried over"]
    assert several[1].value == pytest.approx(-0.033 - 0.031)
    assert np.isnan(several[1].null)
    assert shares_of(bonds)[0].value == 0.834


def test_an_interval_is_turned_with_its_weight() -> None:
    findings = to_frame(factory.column(Place("FX", "uncovered-interest"), CURRENCIES))
    rows = (findings["leg"] == "foreign appreciation") & (findings["term"] == "signal")
    findings.loc[rows, ["lower", "upper"]] = [-0.26, 1.5]
    (column,) = columns_of(findings)
    _, true = shares_of(column)
    assert (true.lower, true.upper) == (-1.5, 0.26)


def test_no_figure_without_its_findings() -> None:
    assert figures_of(to_frame(factory.accounts()), []) == []
    only = figures_of(factory.three_markets(), [])
    assert [figure.name for figure in only] == ["shares"]
    bare = to_frame(factory.column(Place("Own", "columns"), BONDS)).assign(weight=np.nan, share=np.nan)
    assert figures_of(bare, []) == []


def test_horizons_of_a_study_make_a_profile() -> None:
    rows = [
        row for name in ("1m", "12m", "5y") for row in factory.column(Place("FX", "carry", horizon=name), CURRENCIES)
    ]
    profile = next(figure for figure in figures_of(to_frame(rows), []) if figure.name == "horizons")
    (panel,) = profile.panels
    assert panel.finding.startswith("Share of the spread by horizon: paid 1.62 at 1m and 1.62 at 5y; comes true -0.62")
    assert "var(--paid)" in inline_svg(panel)


def test_the_profile_asked_for_has_a_band_that_holds_at_all_horizons() -> None:
    """Ten horizons with a band one wider on either side than their own interval, turned round by the weight of -1."""
    rows = []
    for months in range(1, 11):
        for row in factory.column(Place("FX", "uncovered-interest", horizon=f"{months}m"), CURRENCIES):
            if row["term"] == "signal" and row["section"] == "shares" and row["rank"] == "headline":
                asked = row | {"section": "horizons", "rank": "", "lower": 0.1, "upper": 0.5}
                rows += [row, asked, asked | {"term": BAND, "lower": -0.9, "upper": 1.5}]
    findings = to_frame(rows)
    true = profile_of(rows_of(findings, "FX", "uncovered-interest"), "fundamental")
    assert true is not None
    assert true.uniform is not None
    np.testing.assert_allclose(true.pointwise[:, 0], [-0.5, -0.1])
    np.testing.assert_allclose(true.uniform[:, 0], [-1.5, 0.9])
    np.testing.assert_allclose(true.years, np.arange(1, 11) / 12)
    (panel,) = next(figure for figure in figures_of(findings, []) if figure.name == "horizons").panels
    assert inline_svg(panel).count("fill: var(--paid)") == 2  # the band of all horizons, and that of each


def test_the_running_difference_says_who_was_better_in_the_end(tmp_path: Path) -> None:
    """Its numbers are those of the findings, and so is the sign of the last."""
    study = worlds.BONDS + '\n[evidence]\nforecast = { first = "5y", rolling = "5y" }\n'
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, study, **worlds.bonds())))
    (panel,) = next(figure for figure in results.figures() if figure.name == "forecast").panels
    rows = results.findings
    rows = rows[(rows["section"] == "forecast") & (rows["parity"] == "forward-spot") & (rows["role"] == "return")]
    for scheme, own in rows.groupby("sample"):
        r2 = own.loc[(own["term"] == "R2 against the historical mean") & (own["group"] == "pooled"), "estimate"].iloc[0]
        last = own.loc[own["term"].str.startswith("running difference"), "estimate"].iloc[-1]
        better = "the spread" if last > 0 else "the mean"
        assert f"{scheme} {r2:.3f}, {better} better in the end" in panel.finding
    assert "origins 2005-01 to 2008-12" in panel.source


def test_the_line_of_the_points_is_the_slope_of_the_table(bonds: carrylab.Results, panels: dict[str, Panel]) -> None:
    rows = bonds.findings
    rows = rows[(rows["section"] == "shares") & (rows["group"] == "pooled") & (rows["term"] == "signal")]
    rows = rows[(rows["rank"] == "headline") & (rows["parity"] == rows["parity"].iloc[0])]
    for role in ("return", "fundamental"):
        slope = rows.loc[rows["role"] == role, "estimate"].iloc[0]
        assert f"was followed by {slope:.2f} points of " in panels[f"points-1-{role}"].finding
    assert "against 1.00 if expected returns were constant" in panels["points-1-fundamental"].finding


def test_lowest_highest_and_last_spread(bonds: carrylab.Results, panels: dict[str, Panel]) -> None:
    path = picture_of(bonds.cases[0]).path
    low, last = np.nanmin(path.signal), path.signal[np.isfinite(path.signal)][-1]
    assert f"lowest, {100 * low:.2f}% in " in panels["path-1"].finding
    assert f"last {100 * last:.2f}% in 2009-12." in panels["path-1"].finding


def test_states_are_shaded_and_named(bonds: carrylab.Results) -> None:
    case = bonds.cases[0]
    labels = np.array(
        ["slump" if 20 <= t < 40 else "not slump" for t in range(len(case.parity.calendar))], dtype=object
    )
    picture = picture_of(replace(case, states=(Labelled("slump", labels),)))
    (shaded,) = next(figure for figure in figures_of(bonds.findings, [picture]) if figure.name == "path").panels
    assert "Shaded: slump." in shaded.source
    assert inline_svg(shaded).count("var(--state)") == 2


def test_inline_svg_is_one_image_that_carries_its_finding_and_fetches_nothing(panels: dict[str, Panel]) -> None:
    for panel in panels.values():
        text = inline_svg(panel)
        root = ElementTree.fromstring(text.replace("<svg", '<svg xmlns:xlink="http://www.w3.org/1999/xlink"', 1))
        assert root.attrib["role"] == "img"
        assert root.attrib["aria-labelledby"] == f"{panel.name}-says"
        assert "viewBox" in root.attrib
        assert not list(root.iter("text"))
        places = {element.attrib["id"] for element in root.iter() if "id" in element.attrib}
        assert all(place.startswith(f"{panel.name}-") for place in places)
        used = re.findall(r'href="#([^"]+)"|url\(#([^)]+)\)', text)
        assert {first or second for first, second in used} <= places
        assert not re.search(r"#[0-9a-f]{6}", text), panel.name
        assert "var(--ink)" in text


def digests(figures: list[Figure]) -> dict[str, str]:
    files = dict(figure_files(figures, ["svg", "pdf", "png"]))
    inline = {panel.name: inline_svg(panel).encode() for figure in figures for panel in figure.panels}
    return {name: hashlib.sha256(content).hexdigest() for name, content in (files | inline).items()}


def test_the_same_input_gives_the_same_bytes_in_another_process(bonds: carrylab.Results) -> None:
    script = (
        "import sys, carrylab; from test_figures import digests; "
        "print(digests(carrylab.run(carrylab.read_study(sys.argv[1])).figures()))"
    )
    done = subprocess.run(
        [sys.executable, "-c", script, str(bonds.study.path)],
        cwd=ROOT,
        env=os.environ | {"PYTHONPATH": os.pathsep.join([str(ROOT), "tests", "tests/report"]), "PYTHONHASHSEED": "7"},
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout.strip() == str(digests(bonds.figures()))


def test_files_stand_alone(bonds: carrylab.Results) -> None:
    """PNG at 200 dpi on paper; PDF with its fonts embedded and no date; SVG with texts as outlines."""
    files = dict(figure_files(bonds.figures()[:1], ["svg", "pdf", "png"]))
    assert set(files) == {"shares.svg", "shares.pdf", "shares.png"}
    image = Image.open(io.BytesIO(files["shares.png"]))
    assert image.width == int(WIDTH / 72 * PNG_DPI)
    assert image.info["dpi"][0] == pytest.approx(200, abs=0.1)
    assert image.convert("RGB").getpixel((1, 1)) == tuple(int(LIGHT["paper"][at : at + 2], 16) for at in (1, 3, 5))
    pdf = files["shares.pdf"]
    assert b"/FontFile2" in pdf
    assert b"CreationDate" not in pdf
    root = ElementTree.fromstring(files["shares.svg"])
    assert not list(root.iter(f"{SVG}text"))


def test_names_with_mathematics_and_foreign_scripts_are_drawn_as_they_are() -> None:
    rows = [*factory.column(Place("$x^2$ \\alpha 日本 -->", "carry"), CURRENCIES)]
    (figure,) = figures_of(to_frame(rows), [])
    text = inline_svg(figure.panels[0])
    assert (
        ElementTree.fromstring(text.replace("<svg", '<svg xmlns:xlink="http://www.w3.org/1999/xlink"', 1)) is not None
    )
    assert "-->" not in text
