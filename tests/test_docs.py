"""What the README says is what happens: its commands, tables, studies and Python."""

from __future__ import annotations

import re
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner

from carrylab import cli
from carrylab.study import read_study

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"^```(\w*)\n(.*?)^```", README, flags=re.MULTILINE | re.DOTALL)


def blocks(language: str) -> list[str]:
    return [body for name, body in BLOCKS if name == language]


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder that looks like the project's root."""
    shutil.copytree(ROOT / "datasets_demo", tmp_path / "datasets_demo")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_opens_with_the_job_in_one_paragraph() -> None:
    first = README.split("\n\n")[1]
    assert "spread" in first
    assert "excess return" in first
    assert "carrylab" in first


@pytest.mark.parametrize("block", blocks("console"))
def test_commands_print_what_the_readme_shows(block: str, here: Path) -> None:
    command, shown = block.split("\n", 1)
    words = command.removeprefix("$ carrylab ").split()
    done = CliRunner().invoke(cli.main, words)
    assert done.exit_code == 0, done.output
    assert shown.strip("\n") in done.stdout


def test_there_is_a_printed_table() -> None:
    assert len(blocks("console")) >= 1


@pytest.mark.parametrize("block", blocks("toml"), ids=["whole study", "own columns"])
def test_studies_of_the_readme_are_allowed(block: str, tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    path.write_text(block, encoding="utf-8")
    assert read_study(path).markets


@pytest.mark.parametrize("block", blocks("python"))
def test_the_python_of_the_readme_runs(block: str, here: Path) -> None:
    exec(compile(block, "README.md", "exec"), {})
    assert (here / "demo_results" / "report.txt").is_file()


def test_every_command_stands_in_the_readme() -> None:
    for name in cli.main.commands:
        assert f"carrylab {name}" in README


def test_scripts_of_the_readme_exist() -> None:
    for name in re.findall(r"python (scripts/\w+\.py)", README):
        assert (ROOT / name).is_file(), name
