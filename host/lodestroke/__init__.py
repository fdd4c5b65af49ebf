"""Lodestroke: a bench kit for small pumps with no solid moving parts."""

__version__ = "0.1.0"
