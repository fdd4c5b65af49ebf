"""Message bodies as numbers: dictionaries by field name, and sample rows as numpy records."""

from __future__ import annotations

import struct

import numpy as np

from lodeboard.wire import messages

SAMPLE = np.dtype(
    {
        "names": list(messages.SAMPLE_FIELDS),
        "formats": ["<u4", "<i2", "<i2", "<i2", "<i2", "<i4", "<i4", "<i4", "<i2", "u1", "u1"],
        "offsets": [0, 4, 6, 8, 10, 12, 16, 20, 24, 26, 27],
        "itemsize": struct.calcsize(messages.SAMPLE_FORMAT),
    }
)


def sample_rows(data: bytes) -> np.ndarray:
    """Packed sample rows, one after another, as a structured array (dtype SAMPLE)."""
    return np.frombuffer(data, dtype=SAMPLE)
