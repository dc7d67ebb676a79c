"""Imports go one way, and the routines know nothing of markets, files or tables."""

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).resolve().parent.parent / "carrylab"
MODULES = sorted(PACKAGE.rglob("*.py"))

# What each room may import from inside the package, besides itself.
MAY_IMPORT = {
    "errors": set(),
    "options": {"data.calendar"},
    "schema": {"data.calendar"},
    "sources": {"options", "schema"},
    "questions": {"options", "schema", "sources"},
    "study": {"options", "schema", "sources", "questions", "errors", "data.calendar"},
    "data": {"options", "errors"},
    "markets": {"data", "options", "errors"},
    "regression": {"errors"},
    "report": {"errors", "findings", "data.calendar"},
    "findings": set(),
    "record": {"errors", "findings", "report", "options"},
    "audit": {"regression", "errors"},
}


def imports_of(path: Path) -> set[str]:
    """Names of the package's own modules a file imports at run time, without the leading `carrylab.`."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    skipped = {
        id(node)
        for block in ast.walk(tree)
        if isinstance(block, ast.If) and "TYPE_CHECKING" in ast.unparse(block.test)
        for node in ast.walk(block)
    }
    found = set()
    for node in ast.walk(tree):
        if id(node) in skipped:
            continue
        if isinstance(node, ast.ImportFrom) and node.module and node.module.split(".")[0] == "carrylab":
            inside = node.module.removeprefix("carrylab").lstrip(".")
            found |= {inside} if inside else {alias.name for alias in node.names}
        if isinstance(node, ast.Import):
            found |= {
                alias.name.removeprefix("carrylab.") for alias in node.names if alias.name.startswith("carrylab.")
            }
    return found


def room(module: str) -> str:
    return module.split(".")[0]


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_a_module_imports_only_what_lies_before_it(path: Path) -> None:
    own = room(".".join(path.relative_to(PACKAGE).with_suffix("").parts))
    if own not in MAY_IMPORT:
        return
    allowed = MAY_IMPORT[own]
    for name in imports_of(path):
        assert room(name) == own or room(name) in allowed or name in allowed, f"{path.name} imports carrylab.{name}"


@pytest.mark.parametrize("path", sorted((PACKAGE / "regression").glob("*.py")), ids=lambda path: path.name)
def test_the_routines_use_numpy_and_scipy_only(path: Path) -> None:
    tree = ast.parse(path.read_text(encoding="utf-8"))
    roots = {
        alias.name.split(".")[0] for node in ast.walk(tree) if isinstance(node, ast.Import) for alias in node.names
    }
    roots |= {node.module.split(".")[0] for node in ast.walk(tree) if isinstance(node, ast.ImportFrom) and node.module}
    assert roots <= {
        "__future__",
        "carrylab",
        "collections",
        "dataclasses",
        "functools",
        "itertools",
        "math",
        "numpy",
        "scipy",
        "types",
        "typing",
    }


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_no_module_is_over_500_lines(path: Path) -> None:
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 500
