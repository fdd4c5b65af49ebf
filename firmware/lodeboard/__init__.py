"""What runs on the pump's board. The same files run under CPython (twin) and MicroPython (boards)."""
