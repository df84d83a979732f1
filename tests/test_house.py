"""The house: who may import whom, and what may stand at the top. Reads the code as text."""

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
MAY_IMPORT = {
    "protocol": set(),
    "sim_link": {"protocol"},
    "storage": {"protocol"},
    "console": {"protocol", "sim_link", "storage"},
}
COSTLY = {"scipy", "numpy", "textual", "sqlite_utils", "mujoco", "pybamm", "statsmodels"}
MAY_IMPORT_COSTLY_AT_ONCE = (
    "console/screens/", "console/widgets/", "console/app.py", "sim_link/mechanics/",
)  # fmt: skip
"""Rooms that are nothing without them, and that others import only when they are needed."""
NO_IO = {"threading", "socket", "serial", "sqlite3", "time", "random", "asyncio", "os"}
TOP = {
    "README.md", "DEVELOPERS.md", "LICENSE", "CHANGELOG.md", "pyproject.toml",
    "protocol", "sim_link", "storage", "console", "tests",
}  # fmt: skip
MOST_LINES = 350
MOST_FUNCTION_LINES = 60

MODULES = sorted(
    path.relative_to(ROOT) for package in MAY_IMPORT for path in (ROOT / package).rglob("*.py")
)


def imports(tree: ast.AST) -> Iterator[str]:
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name.partition(".")[0] for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and not node.level:
            yield (node.module or "").partition(".")[0]


def imports_at_once(tree: ast.Module) -> Iterator[str]:
    for node in tree.body:
        if isinstance(node, ast.Import | ast.ImportFrom):
            yield from imports(node)


def parsed(path: Path) -> ast.Module:
    return ast.parse((ROOT / path).read_text())


@pytest.mark.parametrize("path", MODULES, ids=str)
def test_arrows_point_one_way(path: Path) -> None:
    package = path.parts[0]
    ours = {name for name in imports(parsed(path)) if name in MAY_IMPORT or name == "tests"}
    assert ours - {package} <= MAY_IMPORT[package]


@pytest.mark.parametrize("path", MODULES, ids=str)
def test_costly_imports_are_made_where_they_are_needed(path: Path) -> None:
    if not str(path).startswith(MAY_IMPORT_COSTLY_AT_ONCE):
        assert not COSTLY & set(imports_at_once(parsed(path)))


@pytest.mark.parametrize(
    "entry", ["console.cli", "console.orders", "sim_link.options", "sim_link.protocol_sim"]
)
def test_what_starts_first_imports_nothing_costly(entry: str) -> None:
    """Help, refusals and the look for ports answer at once."""
    code = f"import sys, {entry}; print(*sys.modules)"
    run = subprocess.run(
        [sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True
    )
    assert not COSTLY & set(run.stdout.split())


@pytest.mark.parametrize("path", [p for p in MODULES if p.parts[0] == "protocol"], ids=str)
def test_protocol_does_no_io_and_reads_no_clock(path: Path) -> None:
    assert not NO_IO & set(imports(parsed(path)))


@pytest.mark.parametrize("path", MODULES, ids=str)
def test_rooms_are_small_and_say_what_they_own(path: Path) -> None:
    tree = parsed(path)
    assert ast.get_docstring(tree)
    assert len((ROOT / path).read_text().splitlines()) <= MOST_LINES
    for node in ast.walk(tree):
        if isinstance(node, ast.FunctionDef):
            assert (node.end_lineno or 0) - node.lineno < MOST_FUNCTION_LINES, node.name


def test_nothing_else_stands_at_the_top() -> None:
    listed = subprocess.run(
        ["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=False
    )
    if listed.returncode:
        pytest.skip("not a git checkout")
    names = {line.partition("/")[0] for line in listed.stdout.splitlines()}
    assert {name for name in names if not name.startswith(".")} <= TOP
