"""The firmware in a real MicroPython: behind a serial port (paced), or in lock-step."""

from .interpreter import available
from .launcher import VirtualBoard, start_board

__all__ = ["VirtualBoard", "available", "start_board"]
