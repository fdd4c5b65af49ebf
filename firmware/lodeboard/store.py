"""Small files that survive a power cut: two copies, each with sequence number and CRC; newest wins.

One rename is not enough on every board: FAT deletes the old file before it renames. Two copies are
right on LittleFS and on FAT alike. A copy: "LS", sequence, length, CRC-32 over sequence and data,
data. Allocates; never used while armed.
"""

import binascii
import os
import struct

_HEAD = "<2sIHI"
_HEAD_BYTES = struct.calcsize(_HEAD)
DATA_MAX = 0xFFFF


def pack(sequence: int, data: bytes) -> bytes:
    """One copy as it lies on flash."""
    crc = binascii.crc32(data, binascii.crc32(struct.pack("<I", sequence)))
    return struct.pack(_HEAD, b"LS", sequence, len(data), crc & 0xFFFFFFFF) + data


def unpack(raw: bytes) -> "tuple[int, bytes | None]":
    """(sequence, data) of a whole copy; (0, None) of a torn, foreign or damaged one."""
    if len(raw) < _HEAD_BYTES:
        return 0, None
    magic, sequence, length, crc = struct.unpack(_HEAD, raw[:_HEAD_BYTES])
    data = raw[_HEAD_BYTES:]
    if magic != b"LS" or len(data) != length:
        return 0, None
    if binascii.crc32(data, binascii.crc32(struct.pack("<I", sequence))) & 0xFFFFFFFF != crc:
        return 0, None
    return sequence, data


class Store:
    """Named small files in one folder, which is made when first needed."""

    def __init__(self, folder: str) -> None:
        self.folder = folder

    def _path(self, name: str, copy: int) -> str:
        return self.folder + "/" + name + "." + str(copy)

    def _read(self, name: str, copy: int) -> "tuple[int, bytes | None]":
        try:
            file = open(self._path(name, copy), "rb")
        except OSError:
            return 0, None
        try:
            return unpack(file.read())
        except OSError:
            return 0, None
        finally:
            file.close()

    def _newest(self, name: str) -> "tuple[int, int, bytes | None]":
        """(copy, sequence, data) of the newest whole copy; (1, 0, None) when there is none."""
        first, first_data = self._read(name, 0)
        second, second_data = self._read(name, 1)
        if first > second:
            return 0, first, first_data
        return 1, second, second_data

    def load(self, name: str) -> "bytes | None":
        """The bytes last saved whole under this name, or None."""
        return self._newest(name)[2]

    def save(self, name: str, data: bytes) -> None:
        """Write over the older copy; the newer one stays whole meanwhile. Raises OSError."""
        if len(data) > DATA_MAX:
            raise ValueError("store: too long")
        copy, sequence, _ = self._newest(name)
        try:
            os.mkdir(self.folder)
        except OSError:
            pass                       # it is there already
        file = open(self._path(name, 1 - copy), "wb")
        try:
            file.write(pack(sequence + 1, data))
        finally:
            file.close()
