"""The tables of DEVELOPERS.md are those of the code."""

import sys
from pathlib import Path

TOOLS = Path(__file__).resolve().parents[1] / "tools"


def test_tables_in_the_guide_equal_the_code(monkeypatch):
    monkeypatch.syspath_prepend(str(TOOLS))
    import tables

    text = tables.PAGE.read_text(encoding="utf-8")
    assert tables.drawn(text) == text, "run python tests/tools/tables.py"


def test_top_version_of_the_changes_equals_the_code(monkeypatch):
    import lodestroke

    monkeypatch.syspath_prepend(str(TOOLS))
    import tables

    changes = tables.PAGE.read_text(encoding="utf-8").split("## Changes", 1)[1]
    top = next(line[4:].strip() for line in changes.splitlines() if line.startswith("### "))
    assert top == lodestroke.__version__
    sys.modules.pop("tables")
