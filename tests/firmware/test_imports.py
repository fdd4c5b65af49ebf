"""What each firmware file may import: itself, array, struct, binascii; metal only in Hal files."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

import lodeboard

FOLDER = Path(lodeboard.__file__).parent
PLAIN = {"array", "struct", "binascii"}
EXTRA = {
    "compat.py": {"gc", "micropython"},
    "loop.py": {"sys"},                       # print_exception
    "app.py": {"json"},
    "store.py": {"os"},
    "hal_stdio.py": {"micropython", "select", "sys"},
    "hal_rp2.py": {"machine", "micropython", "rp2", "time", "os", "sys", "gc"},
    "crc_fast.py": {"micropython"},
}


def imports(path: Path) -> set[str]:
    """Top-level names that a file imports, those for the type checker left out."""
    names = set()
    tree = ast.parse(path.read_text(encoding="utf-8"))
    skipped = {
        id(child) for node in ast.walk(tree)
        if isinstance(node, ast.If) and getattr(node.test, "id", "") == "TYPE_CHECKING"
        for child in ast.walk(node)
    }
    for node in ast.walk(tree):
        if id(node) in skipped:
            continue
        if isinstance(node, ast.Import):
            names |= {alias.name.split(".")[0] for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.level == 0:
            names.add((node.module or "").split(".")[0])
    return names


@pytest.mark.parametrize("path", sorted(FOLDER.rglob("*.py")), ids=lambda path: path.name)
def test_firmware_file_imports_only_what_it_may(path):
    assert imports(path) <= PLAIN | EXTRA.get(path.name, set())
