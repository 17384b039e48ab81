"""Imports point one way: datasets <- models <- benchmark; reports stands alone; benchmark alone sees all."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
ALLOWED = {
    "datasets": {"datasets"},
    "models": {"datasets", "models"},
    "reports": {"reports"},
    "benchmark": {"datasets", "models", "reports", "benchmark"},
}


def imported_packages(path: Path) -> set[str]:
    """Our packages that a file imports, wherever in the file it does so."""
    names: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative imports hide which package is meant"
            module = node.module or ""
            names |= {f"{module}.{alias.name}" for alias in node.names} if module == "steelyard" else {module}
    return {name.split(".")[1] for name in names if name.startswith("steelyard.")}


@pytest.mark.parametrize("package", sorted(ALLOWED))
def test_imports_point_one_way(package: str) -> None:
    files = sorted((ROOT / package).rglob("*.py"))
    assert files
    strays = {str(path): stray for path in files if (stray := imported_packages(path) - ALLOWED[package])}
    assert not strays


def test_private_names_stay_in_their_module() -> None:
    """No file imports a name that starts with an underscore from another of our modules."""
    reached = [
        f"{path.relative_to(ROOT)}: {alias.name}"
        for package in ALLOWED
        for path in (ROOT / package).rglob("*.py")
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
        if isinstance(node, ast.ImportFrom) and (node.module or "").startswith("steelyard")
        for alias in node.names
        if alias.name.startswith("_")
    ]
    assert not reached


def test_only_the_console_prints() -> None:
    printing = [
        str(path.relative_to(ROOT))
        for package in ALLOWED
        for path in (ROOT / package).rglob("*.py")
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "print"
    ]
    assert set(printing) <= {"benchmark/cli.py"}


def test_files_and_functions_stay_small() -> None:
    for package in ALLOWED:
        for path in (ROOT / package).rglob("*.py"):
            text = path.read_text(encoding="utf-8")
            assert text.count("\n") <= 400, f"{path} is over 400 lines"
            for node in ast.walk(ast.parse(text)):
                if isinstance(node, ast.FunctionDef):
                    body = node.body[1:] if ast.get_docstring(node) else node.body
                    length = (node.end_lineno or 0) - body[0].lineno + 1 if body else 0
                    assert length <= 40, f"{path}: {node.name} has {length} lines of code"
