"""Line numbers of keys, in every way that TOML 1.0 has of writing them."""

from __future__ import annotations

from lodestroke.rig.locate import line_of, lines_of

TEXT = '''# comment = "not a key"
title = "a # b = c"
a.b.c = 1
'q u'."o t" = 2
[table]
key = [ 1, # one = 1
  { x = 1, y = { z = "}" } },
  "]" ]
text = """
fake = 1
[fake]
"""
raw = \'\'\'it''s\'\'\'\'
after = 3

[[rows]]
n = 1
[rows.sub]
m = 1
[[rows]]
n = 2
  [[rows.inner]]
  p = 1
  [[rows.inner]]
  p = 2
[ spaced . out ]
k = 1979-05-27T07:32:00Z
'''


def test_lines_are_found_for_every_way_of_writing_a_key() -> None:
    lines = lines_of(TEXT)
    for path, line in {
        ("title",): 2, ("a", "b", "c"): 3, ("q u", "o t"): 4, ("table",): 5, ("table", "key"): 6,
        ("table", "key", 1): 7, ("table", "key", 1, "y", "z"): 7, ("table", "key", 2): 8,
        ("table", "text"): 9, ("table", "raw"): 13, ("table", "after"): 14, ("rows",): 16,
        ("rows", 0, "n"): 17, ("rows", 0, "sub", "m"): 19, ("rows", 1, "n"): 21,
        ("rows", 1, "inner", 0, "p"): 23, ("rows", 1, "inner", 1, "p"): 25,
        ("spaced", "out", "k"): 27,
    }.items():
        assert lines[path] == line, path
    assert ("table", "fake") not in lines


def test_line_of_a_missing_key_is_that_of_its_table() -> None:
    lines = lines_of(TEXT)
    assert line_of(lines, ("rows", 1, "missing")) == 20
    assert line_of(lines, ("nowhere",)) == 1
