"""Run folders: written whole or not at all, read back exactly, guarded where a spreadsheet would compute."""

from __future__ import annotations

import csv
import hashlib
import json
import tempfile
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from carrylab import record
from carrylab.errors import DataError, ExtraError
from carrylab.findings import to_frame

RUN = record.Run(
    report="A report\n",
    findings=to_frame(
        [{"section": "shares", "market": "Bönds", "term": "signal", "estimate": 1 / 3, "std_error": 0.2}]
    ),
    panel=pd.DataFrame({"date": ["2000-01", "2000-02"], "signal": [0.1, -0.2]}),
    account={"study": 'title = "T"\n', "seconds": {"estimate": 0.1}},
)
ALL = {"report.txt", "findings.csv", "findings.parquet", "panel.csv", "run.json"}
WITH_FORMS = replace(RUN, more={"report.html": b"<!doctype html>", "figures/path-1.svg": b"<svg/>"})
# First characters that make a text a formula in spreadsheets (OWASP ASVS 1.2.10; CWE-1236; CR and LF from memory).
FORMULAS = ["=1+1", "+1", "-1", "@SUM(A1)", "\tx", "\rx", "\nx", "\0x"]
TEXTS = st.text(st.characters(codec="utf-8"), max_size=8) | st.sampled_from(FORMULAS)
NUMBERS = st.floats(allow_nan=True, allow_infinity=True)


def contents(folder: Path) -> dict[str, bytes]:
    return {entry.relative_to(folder).as_posix(): entry.read_bytes() for entry in folder.rglob("*") if entry.is_file()}


def findings_of(values: list[tuple[str, float]]) -> pd.DataFrame:
    return to_frame(
        [
            {"section": "shares", "sample": str(number), "group": text, "note": text, "estimate": value}
            for number, (text, value) in enumerate(values)
        ]
    )


def read_cells(path: Path) -> list[list[str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.reader(file))


def test_a_run_folder_holds_these_files(tmp_path: Path) -> None:
    assert record.save(RUN, tmp_path / "new" / "run", parquet=True) == tmp_path / "new" / "run"
    found = contents(tmp_path / "new" / "run")
    assert set(found) == ALL
    assert set(found) <= set(record.FILES)
    assert found["report.txt"] == b"A report\n"
    account = json.loads(found["run.json"])
    assert account == {"format": "carrylab run 1", "study": 'title = "T"\n', "seconds": {"estimate": 0.1}}
    assert "Bönds".encode() in found["findings.csv"]
    assert found["panel.csv"] == b"date,signal\n2000-01,0.1\n2000-02,-0.2\n"
    assert {entry.name for entry in (tmp_path / "new").iterdir()} == {"run"}


def test_further_forms_stand_beside_the_report(tmp_path: Path) -> None:
    folder = record.save(WITH_FORMS, tmp_path / "run", parquet=False)
    assert (folder / "report.html").read_bytes() == b"<!doctype html>"
    assert (folder / "figures" / "path-1.svg").read_bytes() == b"<svg/>"
    record.save(RUN, folder, parquet=False)
    assert not (folder / "figures").exists()


def test_the_same_run_gives_the_same_bytes(tmp_path: Path) -> None:
    first, second = (record.save(RUN, tmp_path / name, parquet=True) for name in "ab")
    assert contents(first) == contents(second)
    assert all(b"\r" not in raw for name, raw in contents(first).items() if name != "findings.parquet")


def test_parquet_holds_the_same_findings(tmp_path: Path) -> None:
    folder = record.save(RUN, tmp_path / "run", parquet=True)
    again = pd.read_parquet(folder / "findings.parquet")
    pd.testing.assert_frame_equal(again, record.read_findings(folder / "findings.csv"), check_dtype=False)


def test_without_pyarrow(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(record, "find_spec", lambda _name: None)
    with pytest.raises(ExtraError, match=r"^findings\.parquet needs pyarrow; .*parquet extra$"):
        record.save(RUN, tmp_path / "run", parquet=True)
    assert list(tmp_path.iterdir()) == []
    record.save(RUN, tmp_path / "run", parquet=False)
    assert set(contents(tmp_path / "run")) == ALL - {"findings.parquet"}


def test_an_older_run_is_replaced_whole(tmp_path: Path) -> None:
    record.save(replace(RUN, report="Old\n"), tmp_path / "run", parquet=True)
    record.save(RUN, tmp_path / "run", parquet=False)
    assert (tmp_path / "run" / "report.txt").read_text(encoding="utf-8") == "A report\n"
    assert [entry.name for entry in tmp_path.iterdir()] == ["run"]


def test_an_empty_folder_is_taken(tmp_path: Path) -> None:
    (tmp_path / "run").mkdir()
    record.save(RUN, tmp_path / "run", parquet=True)
    assert set(contents(tmp_path / "run")) == ALL


def somebodys_folder(place: Path) -> None:
    place.mkdir()
    (place / "thesis.txt").write_text("mine", encoding="utf-8")


def folder_with_another_account(place: Path) -> None:
    place.mkdir()
    (place / "run.json").write_text('["other"]', encoding="utf-8")


def a_file(place: Path) -> None:
    place.write_text("mine", encoding="utf-8")


def run_with_notes(place: Path) -> None:
    record.save(RUN, place, parquet=False)
    (place / "my notes.txt").write_text("mine", encoding="utf-8")


def run_with_a_photograph(place: Path) -> None:
    record.save(WITH_FORMS, place, parquet=False)
    (place / "figures" / "Me.jpg").write_text("mine", encoding="utf-8")


@pytest.mark.parametrize(
    ("make", "said"),
    [
        (somebodys_folder, "is no run folder"),
        (folder_with_another_account, "is no run folder"),
        (a_file, "is no run folder"),
        (run_with_notes, "holds 'my notes.txt', which no run wrote"),
        (run_with_a_photograph, "holds 'figures/Me.jpg', which no run wrote"),
    ],
)
def test_what_others_wrote_is_never_replaced(make: Callable[[Path], None], said: str, tmp_path: Path) -> None:
    place = tmp_path / "place"
    make(place)
    before = contents(place) if place.is_dir() else place.read_bytes()
    with pytest.raises(DataError, match=said) as caught:
        record.save(RUN, place, parquet=False)
    assert "\n" not in str(caught.value)
    assert (contents(place) if place.is_dir() else place.read_bytes()) == before
    assert list(tmp_path.iterdir()) == [place]


def test_a_file_managers_hidden_file_is_no_obstacle(tmp_path: Path) -> None:
    record.save(RUN, tmp_path / "run", parquet=True)
    (tmp_path / "run" / ".DS_Store").write_bytes(b"")
    record.save(RUN, tmp_path / "run", parquet=True)
    assert set(contents(tmp_path / "run")) == ALL


@pytest.mark.parametrize("stop", [KeyboardInterrupt, ZeroDivisionError])
@pytest.mark.parametrize("older", [True, False])
def test_a_stop_while_writing_changes_nothing(
    stop: type[BaseException], older: bool, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    if older:
        record.save(replace(RUN, report="Old\n"), tmp_path / "run", parquet=True)

    def stopped(frame: pd.DataFrame, path: Path) -> None:
        path.write_text("half", encoding="utf-8")
        raise stop

    monkeypatch.setattr(record, "write_csv", stopped)
    with pytest.raises(stop):
        record.save(RUN, tmp_path / "run", parquet=True)
    kept = [entry.name for entry in tmp_path.iterdir()]
    assert kept == (["run"] if older else [])
    assert not older or (tmp_path / "run" / "report.txt").read_bytes() == b"Old\n"


def test_a_stop_between_the_two_renames_brings_the_old_run_back(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    record.save(replace(RUN, report="Old\n"), tmp_path / "run", parquet=True)
    rename = Path.rename

    def stopped(self: Path, target: Path) -> Path:
        if self.name == "run" and self.parent != tmp_path:
            raise KeyboardInterrupt
        return rename(self, target)

    monkeypatch.setattr(Path, "rename", stopped)
    with pytest.raises(KeyboardInterrupt):
        record.save(RUN, tmp_path / "run", parquet=True)
    assert (tmp_path / "run" / "report.txt").read_bytes() == b"Old\n"
    assert [entry.name for entry in tmp_path.iterdir()] == ["run"]


def test_a_place_below_a_file_cannot_be_written(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("", encoding="utf-8")
    with pytest.raises(DataError, match="cannot be written"):
        record.save(RUN, tmp_path / "file" / "run", parquet=False)


@pytest.mark.parametrize("text", FORMULAS)
def test_texts_that_begin_a_formula_get_one_quote(text: str, tmp_path: Path) -> None:
    record.write_csv(pd.DataFrame({text: [text, "plain"], "number": [-1.5, np.inf]}), tmp_path / "x.csv")
    assert read_cells(tmp_path / "x.csv") == [[f"'{text}", "number"], [f"'{text}", "-1.5"], ["plain", "inf"]]


def test_numbers_are_the_shortest_that_read_back(tmp_path: Path) -> None:
    values = [0.1, 1 / 3, -0.0, 5e-324, 1.7976931348623157e308, -2.5e-17, 12736.0]
    record.write_csv(pd.DataFrame({"x": values}), tmp_path / "x.csv")
    cells = [row[0] for row in read_cells(tmp_path / "x.csv")[1:]]
    assert cells == [repr(value) for value in values]


@settings(max_examples=150, deadline=None)
@given(st.lists(st.tuples(TEXTS, NUMBERS), min_size=1, max_size=6))
def test_findings_come_back_exactly(values: list[tuple[str, float]]) -> None:
    findings = findings_of(values)
    with tempfile.TemporaryDirectory() as folder:
        record.write_csv(findings, Path(folder) / "findings.csv")
        again = record.read_findings(Path(folder) / "findings.csv")
    assert list(again.columns) == list(findings.columns)
    assert again["group"].tolist() == again["note"].tolist() == [text for text, _ in values]
    numbers = np.array([number for _, number in values])
    np.testing.assert_array_equal(again["estimate"], numbers)
    known = ~np.isnan(numbers)
    np.testing.assert_array_equal(np.signbit(again["estimate"])[known], np.signbit(numbers)[known])


@pytest.mark.parametrize("raw", [b"", b"a,b\n1,2\n", b"\xff\xfe\x00", None])
def test_other_files_are_no_findings(raw: bytes | None, tmp_path: Path) -> None:
    path = tmp_path / "findings.csv"
    if raw is not None:
        path.write_bytes(raw)
    with pytest.raises(DataError, match=r"give the findings\.csv of a run folder"):
        record.read_findings(path)


def test_hashes_tell_files_of_one_name_apart(tmp_path: Path) -> None:
    paths = [tmp_path / "a" / "rates.csv", tmp_path / "b" / "rates.csv", tmp_path / "spot.csv"]
    for path in paths:
        path.parent.mkdir(exist_ok=True)
        path.write_bytes(path.parent.name.encode() if path.parent != tmp_path else b"abc")
    found = record.hashes([*paths, paths[0]])
    assert set(found) == {paths[0].as_posix(), paths[1].as_posix(), "spot.csv"}
    # SHA-256 of "abc": FIPS 180-2, appendix B.1.
    assert found["spot.csv"] == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert found[paths[0].as_posix()] == hashlib.sha256(b"a").hexdigest()


def test_versions_name_what_makes_the_numbers() -> None:
    assert {"python", "carrylab", "numpy", "pandas", "scipy"} <= set(record.versions())


def test_fifty_thousand_rows_take_a_fraction_of_a_second(tmp_path: Path) -> None:
    rows = 50_000
    numbers = np.random.default_rng(1).standard_normal((rows, 3))
    panel = pd.DataFrame(numbers, columns=["signal", "excess return", "rate rise"])
    panel.insert(0, "entity", np.resize(["QM 2y", "QN 5y"], rows))
    begun = time.perf_counter()
    record.write_csv(panel, tmp_path / "panel.csv")
    assert time.perf_counter() - begun < 2  # a fifth of a second where nothing else runs
