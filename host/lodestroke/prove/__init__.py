"""Searching for what could go wrong: varied plants, injected faults, invariants over every trace."""

from .case_file import read_case, write_case
from .faults import Case, Fault, Faulty
from .invariants import INVARIANTS, Broken, judge
from .search import Proof, search
from .trace import Trace, trace_of

__all__ = [
    "INVARIANTS",
    "Broken",
    "Case",
    "Fault",
    "Faulty",
    "Proof",
    "Trace",
    "judge",
    "read_case",
    "search",
    "trace_of",
    "write_case",
]
