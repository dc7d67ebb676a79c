"""The command line as a newcomer meets it: what it prints, what it refuses, and that it leaves nothing half-written."""

from __future__ import annotations

import json
from pathlib import Path

import pandas as pd
import pytest
import worlds
from click.testing import CliRunner, Result

from carrylab import cli, record


def call(*words: str | Path) -> Result:
    return CliRunner().invoke(cli.main, [str(word) for word in words])


def refused(result: Result) -> str:
    """The message of a refusal: exit code 2, nothing on standard output, no traceback."""
    assert result.exit_code == 2, result.output
    assert result.stdout == ""
    assert "Traceback" not in result.stderr
    return result.stderr.strip()


@pytest.fixture
def study(tmp_path: Path) -> Path:
    return worlds.write(tmp_path, worlds.CURRENCIES, **worlds.currencies())


def test_every_command_has_help() -> None:
    assert set(cli.main.commands) == {"calibrate", "check", "run", "show", "start"}
    for name in cli.main.commands:
        found = call(name, "--help")
        assert found.exit_code == 0
        assert "STUDY" in found.output or "FILES" in found.output


def test_run_prints_the_report_and_writes_the_folder(study: Path, tmp_path: Path) -> None:
    found = call("run", study, "--into", tmp_path / "out", "--parquet")
    assert found.exit_code == 0, found.output
    report = (tmp_path / "out" / "report.txt").read_text(encoding="utf-8")
    assert report in found.stdout
    assert "paid as excess return" in report
    account = json.loads((tmp_path / "out" / "run.json").read_text(encoding="utf-8"))
    assert account["study"] == worlds.CURRENCIES
    assert set(account["data_sha256"]) == {"spot.csv", "deposits.csv"}
    again = record.read_findings(tmp_path / "out" / "findings.csv")
    pd.testing.assert_frame_equal(again, pd.read_parquet(tmp_path / "out" / "findings.parquet"), check_dtype=False)


def test_figures_are_written_as_files_on_request(study: Path, tmp_path: Path) -> None:
    found = call("run", study, "--into", tmp_path / "out", "--figures", "svg", "--figures", "png")
    assert found.exit_code == 0, found.output
    names = {entry.name for entry in (tmp_path / "out" / "figures").iterdir()}
    assert {"shares.svg", "shares.png", "path-1.svg", "points-1-return.png"} <= names
    assert (tmp_path / "out" / "report.html").read_text(encoding="utf-8").startswith("<!doctype html>")
    assert "'gif' is not one of 'svg', 'pdf', 'png'" in refused(call("run", study, "--figures", "gif"))
    assert call("run", study, "--into", tmp_path / "out").exit_code == 0
    assert not (tmp_path / "out" / "figures").exists()


def test_run_replaces_its_own_folder_and_no_other(study: Path, tmp_path: Path) -> None:
    assert call("run", study, "--into", tmp_path / "out").exit_code == 0
    assert call("run", study, "--into", tmp_path / "out").exit_code == 0
    kept = tmp_path / "mine"
    kept.mkdir()
    (kept / "letter.txt").write_text("dear", encoding="utf-8")
    assert "is no run folder of carrylab" in refused(call("run", study, "--into", kept))
    assert (kept / "letter.txt").read_text(encoding="utf-8") == "dear"
    assert not [entry for entry in tmp_path.iterdir() if entry.name.startswith(".")]


def test_audit_agrees_with_other_code(study: Path, tmp_path: Path) -> None:
    found = call("run", study, "--into", tmp_path / "out", "--audit")
    assert found.exit_code == 0
    lines = [line for line in found.stdout.splitlines() if "largest relative difference" in line]
    assert len(lines) >= 3
    assert all(float(line.split()[-1]) < 1e-8 for line in lines)
    assert "not compared" in found.stdout


def test_check_counts_and_exits_by_level(study: Path, tmp_path: Path) -> None:
    found = call("check", study)
    assert found.exit_code == 0
    assert found.stdout.splitlines()[-1].startswith("0 errors")
    files = worlds.columns()
    files["panel"] = files["panel"].assign(dy=files["panel"]["dy"] + 1)
    wrong = call("check", worlds.write(tmp_path, worlds.COLUMNS, **files))
    assert wrong.exit_code == 2
    assert "error I1" in wrong.stdout
    assert "error I1" in refused(call("run", tmp_path / "study.toml", "--into", tmp_path / "out"))
    assert not (tmp_path / "out").exists()


def test_show_works_one_row(study: Path) -> None:
    found = call("show", study, "--entity", "CCC", "--date", "2003-05")
    assert found.exit_code == 0, found.output
    assert "spot.csv row" in found.stdout
    assert "deposits.csv row" in found.stdout
    assert "2003-08" in found.stdout
    assert "sum of weight x leg" in found.stdout
    assert "no such market; allowed: FX" in refused(call("show", study, "--market", "FY"))
    assert "allowed: BBB, CCC" in refused(call("show", study, "--entity", "DDD"))
    assert "allowed are 2000-01 to" in refused(call("show", study, "--date", "1990-01"))


def changed(frame: pd.DataFrame, row: int, column: str, value: object) -> pd.DataFrame:
    """The frame as text with one cell changed; `row` counts data rows from 0."""
    copy = frame.astype(str)
    copy.iloc[row, copy.columns.get_loc(column)] = str(value)
    return copy


SPOT = [
    ("a missing file", None, "no such file"),
    ("a missing column", lambda f: f.rename(columns={"date": "day"}), "no column 'date'"),
    ("an impossible date", lambda f: changed(f, 3, "date", "2000-02-30"), "row 5"),
    ("an ambiguous date", lambda f: changed(f, 3, "date", "03/04/2000"), "date_order"),
    ("a mixed decimal sign", lambda f: changed(f, 3, "value", "1,25"), "row 5"),
    ("a word for a number", lambda f: changed(f, 3, "value", "n/a"), "'n/a'"),
    ("a negative price", lambda f: changed(f, 3, "value", "-1.5"), "row 5"),
    ("one key, two values", lambda f: pd.concat([f, f.iloc[:1].assign(value=9.0)]), "rows 2 and 242"),
]


@pytest.mark.parametrize(("what", "change", "line"), SPOT, ids=[case[0] for case in SPOT])
def test_bad_spot_files(tmp_path: Path, what: str, change: object, line: str) -> None:
    files = worlds.currencies()
    path = worlds.write(tmp_path, worlds.CURRENCIES, **files)
    spot = tmp_path / "spot.csv"
    spot.unlink() if change is None else change(files["spot"]).to_csv(spot, index=False)  # type: ignore[operator]
    said = refused(call("run", path, "--into", tmp_path / "out"))
    assert "spot.csv" in said
    assert line in said
    assert len(said.splitlines()) == 1
    assert not (tmp_path / "out").exists()


BYTES = [
    ("0 bytes", b"", "is empty"),
    ("a zip under a csv name", b"PK\x03\x04rest", "zip"),
    ("NUL bytes", b"date,currency,value\n2000-01-31,BBB,\x001\n", "NUL"),
    ("another encoding", "date,currency,value\n2000-01-31,BBÉ,1\n".encode("latin-1"), "encoding"),
]


@pytest.mark.parametrize(("what", "content", "line"), BYTES, ids=[case[0] for case in BYTES])
def test_files_that_are_no_text(study: Path, tmp_path: Path, what: str, content: bytes, line: str) -> None:
    (tmp_path / "spot.csv").write_bytes(content)
    said = refused(call("run", study, "--into", tmp_path / "out"))
    assert line in said
    assert len(said.splitlines()) == 1


def test_a_folder_and_a_file_that_may_not_be_read(study: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "spot.csv").unlink()
    (tmp_path / "spot.csv").mkdir()
    assert "folder" in refused(call("run", study, "--into", tmp_path / "out"))
    (tmp_path / "spot.csv").rmdir()
    (tmp_path / "spot.csv").write_text("date,currency,value\n", encoding="utf-8")
    real = Path.read_bytes

    def closed(path: Path) -> bytes:
        if path.name == "spot.csv":
            raise PermissionError(13, "denied")
        return real(path)

    monkeypatch.setattr(Path, "read_bytes", closed)
    assert "permission denied" in refused(call("run", study, "--into", tmp_path / "out"))


STUDIES = [
    ("an unknown key", worlds.CURRENCIES, ("by =", "bye ="), "did you mean 'by'?"),
    ("a wrong type", worlds.CURRENCIES, ('by = "currency"', "by = 1"), "key by: 1 is not allowed"),
    ("a horizon off the calendar", worlds.CURRENCIES, ('["3m"]', '["2w"]'), "no whole number of months"),
    ("a missing tenor", worlds.CURRENCIES, ('["3m"]', '["6m"]'), "no deposits of 6m"),
    ("an empty window", worlds.CURRENCIES, ("horizons", 'from = "2050-01"\nhorizons'), "from and until"),
    ("another home", worlds.CURRENCIES, ('home = "AAA"', 'home = "ZZZ"'), "'ZZZ'"),
]


@pytest.mark.parametrize(("what", "text", "change", "line"), STUDIES, ids=[case[0] for case in STUDIES])
def test_bad_studies(tmp_path: Path, what: str, text: str, change: tuple[str, str], line: str) -> None:
    assert change[0] in text
    path = worlds.write(tmp_path, text.replace(*change), **worlds.currencies())
    said = refused(call("run", path, "--into", tmp_path / "out"))
    assert line in said
    assert not (tmp_path / "out").exists()


def test_a_maturity_that_is_not_there(tmp_path: Path) -> None:
    path = worlds.write(tmp_path, worlds.BONDS.replace('["2y", "3y"]', '["2y", "5y"]'), **worlds.bonds())
    said = refused(call("run", path, "--into", tmp_path / "out"))
    assert "maturity" in said
    assert "missing_maturity" in said


COLUMNS = [
    ("a constant signal", lambda f: f.assign(spread=1.0, rx=1.0, dy=0.0), "does not vary"),
    ("a leg that is all missing", lambda f: f.assign(rx=""), "'excess return' has no value at all"),
    (
        "no date in common",
        lambda f: f.assign(rx=f["rx"].where(f.index < 60), dy=f["dy"].where(f.index >= 60)),
        "no row",
    ),
    ("a group of one", lambda f: f[(f["country"] != "EC") | (f["date"] == "2003-01-31")], "entity EC"),
]


@pytest.mark.parametrize(("what", "change", "line"), COLUMNS, ids=[case[0] for case in COLUMNS])
def test_panels_that_cannot_be_estimated(tmp_path: Path, what: str, change: object, line: str) -> None:
    panel = worlds.columns()["panel"]
    path = worlds.write(tmp_path, worlds.COLUMNS, panel=change(panel))  # type: ignore[operator]
    said = refused(call("run", path, "--into", tmp_path / "out"))
    assert line in said
    assert not (tmp_path / "out").exists()


def test_the_country_code_na_stays_a_code(tmp_path: Path) -> None:
    panel = worlds.columns()["panel"].replace({"country": {"EA": "NA"}})
    found = call("run", worlds.write(tmp_path, worlds.COLUMNS, panel=panel), "--into", tmp_path / "out")
    assert found.exit_code == 0
    assert "NA" in set(record.read_findings(tmp_path / "out" / "findings.csv")["group"])


def test_parquet_without_its_package(study: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(record, "find_spec", lambda _name: None)
    said = refused(call("run", study, "--into", tmp_path / "out", "--parquet"))
    assert "pyarrow" in said
    assert len(said.splitlines()) == 1
    assert not (tmp_path / "out").exists()


def test_a_stop_leaves_nothing_behind(study: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def stopped(*_args: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(record, "write_csv", stopped)
    found = call("run", study, "--into", tmp_path / "out")
    assert found.exit_code == 130
    assert "Stopped" in found.stderr
    assert {entry.name for entry in tmp_path.iterdir()} == {"study.toml", "spot.csv", "deposits.csv"}


def test_formulas_in_texts_are_guarded_and_numbers_are_not(tmp_path: Path) -> None:
    panel = worlds.columns()["panel"].replace({"country": {"EA": "=cmd()", "EB": "'quoted"}})
    found = call("run", worlds.write(tmp_path, worlds.COLUMNS, panel=panel), "--into", tmp_path / "out")
    assert found.exit_code == 0, found.output
    text = (tmp_path / "out" / "findings.csv").read_text(encoding="utf-8")
    assert ",'=cmd()," in text
    assert ",=cmd()" not in text
    assert ",-0." in text
    again = record.read_findings(tmp_path / "out" / "findings.csv")
    assert {"=cmd()", "'quoted", "EC", "pooled"} <= set(again["group"])


def test_a_code_left_out_that_is_not_there(tmp_path: Path) -> None:
    text = worlds.CURRENCIES.replace('by = "currency"', 'leave_out = ["BBC"]')
    said = refused(call("run", worlds.write(tmp_path, text, **worlds.currencies()), "--into", tmp_path / "out"))
    assert "key leave_out: 'BBC' is not in this market; did you mean 'BBB'?" in said


def test_places_that_cannot_be_written(study: Path, tmp_path: Path) -> None:
    said = refused(call("run", study, "--into", tmp_path / "spot.csv" / "out"))
    assert "cannot be written" in said
    said = refused(call("start", tmp_path / "spot.csv", "--study", tmp_path / "no" / "such" / "study.toml"))
    assert "cannot be written" in said
    assert "exists already" in refused(call("start", tmp_path / "spot.csv", "--study", study))
