"""Firmware onto a board: the bundle, its two slots, and the real mpremote that carries it."""

from .bundle import Bundle, board_image, build_bundle, bundle_id_for
from .install import install

__all__ = ["Bundle", "board_image", "build_bundle", "bundle_id_for", "install"]
