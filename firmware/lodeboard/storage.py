"""Imported before everything else on a board: keeps the heap in large pieces.

The one large buffer is made first, and garbage is collected often while the rest is imported, so
that what importing leaves behind does not lie scattered between what stays.
"""

from .compat import collect_often

SAMPLE_ROWS = bytearray(1280 * 28)       # rings.ROWS * rings.ROW_BYTES
collect_often(4096)
