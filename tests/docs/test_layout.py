"""The tree stays as it was laid out, and files and functions stay small enough to be read."""

from __future__ import annotations

import ast
import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
TOP = {
    "README.md",
    "DEVELOPERS.md",
    "LICENSE",
    "pyproject.toml",
    ".gitignore",
    ".ci",
    "firmware",
    "host",
    "tests",
    "hil_configs",
}
FILE_MAX = 400  # lines; most files have 100 to 300
FUNCTION_MAX = 60  # lines; half of them have ten at most
SOURCES = sorted(
    path for folder in ("firmware", "host", "tests") for path in (ROOT / folder).rglob("*.py")
)


def tracked() -> list[str]:
    """What the repository holds; skips where this is no clone."""
    if not (ROOT / ".git").exists():
        pytest.skip("not a clone: what is tracked cannot be told")
    listed = subprocess.run(
        ["git", "-C", str(ROOT), "ls-files"], capture_output=True, text=True, check=False
    )
    if listed.returncode:
        pytest.skip(f"git does not list this clone: {listed.stderr.strip()}")
    return listed.stdout.splitlines()


def functions(path: Path) -> list[tuple[str, int]]:
    """Name and length of every function of a file."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    return [
        (node.name, (node.end_lineno or 0) - node.lineno + 1)
        for node in ast.walk(tree)
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef)
    ]


def test_nothing_new_lies_at_the_top() -> None:
    assert {name.split("/", 1)[0] for name in tracked()} <= TOP


def test_nothing_built_is_tracked() -> None:
    built = re.compile(r"(^|/)(__pycache__|\.mypy_cache|build|dist)/|\.(pyc|db|whl)$")
    assert [name for name in tracked() if built.search(name)] == []


@pytest.mark.parametrize("path", SOURCES, ids=lambda path: str(path.relative_to(ROOT)))
def test_files_and_functions_fit_their_budget(path: Path) -> None:
    assert len(path.read_text(encoding="utf-8").splitlines()) <= FILE_MAX
    assert [row for row in functions(path) if row[1] > FUNCTION_MAX] == []


@pytest.mark.parametrize("folder", ["firmware", "host"])
def test_most_functions_are_short(folder: str) -> None:
    lengths = sorted(
        length
        for path in SOURCES
        if path.is_relative_to(ROOT / folder)
        for _, length in functions(path)
    )
    assert lengths[len(lengths) // 2] <= 12
    assert lengths[len(lengths) * 9 // 10] <= 35


def test_only_hal_files_import_the_machine() -> None:
    wanted = re.compile(r"^\s*(import|from) (machine|rp2)\b", re.M)
    offenders = [
        path.name
        for path in (ROOT / "firmware").rglob("*.py")
        if wanted.search(path.read_text(encoding="utf-8")) and not path.name.startswith("hal_")
    ]
    assert offenders == []


def test_every_module_says_what_it_is_for() -> None:
    """In its docstring, or in a comment at its very top (boot files and scripts for a board)."""
    silent = []
    for path in SOURCES:
        text = path.read_text(encoding="utf-8").strip()
        if text and not text.startswith("#") and ast.get_docstring(ast.parse(text)) is None:
            silent.append(str(path.relative_to(ROOT)))
    assert silent == []


def test_test_files_have_names_of_their_own() -> None:
    """Two of one name cannot both be collected."""
    names = [path.name for path in (ROOT / "tests").rglob("test_*.py")]
    assert sorted(names) == sorted(set(names))
