"""A live page of a run, on this machine only."""

from .server import Server

__all__ = ["Server"]
