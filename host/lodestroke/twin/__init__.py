"""The firmware imported by CPython, against the plant, in virtual time."""
