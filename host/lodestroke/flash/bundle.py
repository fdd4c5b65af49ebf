"""What goes on a board for a rig: firmware files, its pins, and a manifest of SHA-256 sums."""

from __future__ import annotations

import binascii
import hashlib
import json
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import lodeboard

from ..shipped import boot_dir

HALS = {"virtual": "hal_virtual", "rp2040": "lodeboard.hal_rp2", "rp2350": "lodeboard.hal_rp2"}
SLOTS = ("slot_a", "slot_b")
BOOT_WINDOW_MS = {"virtual": 50}      # others: what boot/slots.py says
GOOD = -1                             # slots.py: a package that has proved good


@dataclass(frozen=True)
class Bundle:
    """Files of one slot by path below it, manifest included; boot files by name.

    bundle_id: first 8 bytes of the SHA-256 of the manifest's `files` table as canonical JSON.
    """

    kind: str
    files: dict[str, bytes]
    boot: dict[str, bytes]
    bundle_id: bytes
    manifest: dict[str, Any] = field(repr=False)


def sha256(data: bytes) -> str:
    return hashlib.sha256(data).hexdigest()


def _firmware_files(kind: str) -> dict[str, bytes]:
    """The package as it stands, without other boards' hardware layers."""
    folder = Path(str(lodeboard.__file__)).parent
    wanted = {"hal", "hal_stdio", HALS[kind].rpartition(".")[2]}
    files = {}
    for path in sorted(folder.rglob("*.py")):
        if path.stem.startswith("hal") and path.stem not in wanted:
            continue
        files[f"lodeboard/{path.relative_to(folder).as_posix()}"] = path.read_bytes()
    return files


def board_json(rig: Any) -> bytes:
    """What the Hal must know of this rig: kind, pins, PWM frequency."""
    board = rig.board
    pins = getattr(board, "pins", None)
    table: dict[str, Any] = {"hal": HALS[board.kind], "kind": board.kind}
    if pins is not None:
        table["pins"] = {name: pin for name, pin in pins.model_dump().items() if pin is not None}
        table["pwm_hz"] = round(rig.driver.pwm)
        table["tick_us"] = round(board.tick * 1e6)
    return json.dumps(table, sort_keys=True).encode()


def build_bundle(rig: Any) -> Bundle:
    """Firmware for this rig's board. Raises Unavailable when boot files are missing."""
    kind: str = rig.board.kind
    files = _firmware_files(kind)
    files["board.json"] = board_json(rig)
    sums = {name: sha256(data) for name, data in sorted(files.items())}
    canonical = json.dumps(sums, sort_keys=True, separators=(",", ":")).encode()
    bundle_id = hashlib.sha256(canonical).digest()[:8]
    manifest = {"bundle": bundle_id.hex(), "board": kind, "files": sums}
    files["bundle.txt"] = bundle_id.hex().encode() + b"\n"
    files["manifest.json"] = json.dumps(manifest, sort_keys=True).encode()
    boot = {path.name: path.read_bytes() for path in sorted(boot_dir().glob("*.py"))}
    return Bundle(kind, files, boot, bundle_id, manifest)


def bundle_id_for(rig: Any) -> bytes:
    """The 8 bytes that a board flashed for this rig reports."""
    return build_bundle(rig).bundle_id


def pointer_line(sequence: int, slot: str, left: int, back: str, window_ms: int) -> bytes:
    """The slot pointer as boot/slots.py writes it."""
    line = f"{sequence} {slot} {left} {back} {window_ms}"
    return f"{line} {binascii.crc32(line.encode())}\n".encode()


def board_image(rig: Any) -> dict[str, bytes]:
    """A whole flash with the firmware installed and proved, by path: for a virtual board that
    comes ready.
    """
    bundle = build_bundle(rig)
    image = dict(bundle.boot)
    image.update({f"{SLOTS[0]}/{name}": data for name, data in bundle.files.items()})
    image["pointer.0"] = pointer_line(1, SLOTS[0], GOOD, "-", BOOT_WINDOW_MS.get(bundle.kind, 1500))
    return image
