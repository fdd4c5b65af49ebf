"""The search: Hypothesis draws cases, the twin runs them, invariants judge, a failure is shrunk."""

from __future__ import annotations

import random
import tempfile
from collections import Counter
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, TypeVar, get_args

from hypothesis import HealthCheck, Phase, Verbosity, find, settings
from hypothesis import strategies as st
from hypothesis.configuration import set_hypothesis_home_dir
from hypothesis.errors import NoSuchExample

from lodeboard.limits import CHANNELS

from ..errors import RigError, ScheduleError
from .faults import OF_A_SENSOR, Case, Fault, Kind
from .invariants import Broken, judge
from .trace import Trace

if TYPE_CHECKING:
    from ..rig import Rig

FAULTS_MOST = 3
LENGTH_MOST = 8_000  # ticks: longer than any shipped watch needs to notice
# Hypothesis likes to draw numbers that it finds in whatever source is loaded, and small ones. Far
# out there are none: the same seed then tries the same cases everywhere, evenly spread.
_FAR = 0x6C6F64657374726F
SHRINKS = 4  # as many runs go into shrinking a failure as into finding one, times this


@dataclass
class Proof:
    """What a search found: how far it came, and the smallest case that breaks an invariant."""

    tries: int
    cases: int = 0  # that ran while searching
    shrink_runs: int = 0
    outcomes: Counter[str] = field(default_factory=Counter)  # "no trip", or the trip's name
    fault_kinds: Counter[str] = field(default_factory=Counter)
    least_margin_pa: float = float("inf")  # over cases that blind no pressure
    peak_coil_c: float = float("-inf")
    broken: Broken | None = None
    case: Case | None = None
    interrupted: bool = False


_T = TypeVar("_T")


def _whole(least: int, most: int) -> st.SearchStrategy[int]:
    """Whole numbers, evenly; shrinks towards the least."""
    return st.integers(_FAR, _FAR + most - least).map(lambda n: n - _FAR + least)


def _one_of(choices: list[_T]) -> st.SearchStrategy[_T]:
    return _whole(0, len(choices) - 1).map(choices.__getitem__)


def cases(rig: Rig, ticks: int) -> st.SearchStrategy[Case]:
    """Every pump within the rig's tolerances, and up to FAULTS_MOST faults within so many ticks."""
    wired = [name for name in CHANNELS if getattr(rig.sensors, name) is not None]
    kinds = list(get_args(Kind))

    def fault(kind: str) -> st.SearchStrategy[Fault]:
        sizes = {
            "jump": _whole(1, 16_000).map(lambda n: n // 2 if n % 2 else -n // 2),
            "noise": _whole(0, 2000),
            "supply_sag": _whole(0, 70),
        }
        return st.builds(
            Fault,
            kind=st.just(kind),
            channel=_one_of(wired) if kind in OF_A_SENSOR else st.just(""),
            start_tick=_whole(1, max(1, ticks)),
            length_ticks=_whole(1, LENGTH_MOST),
            magnitude=sizes.get(kind, st.just(0)),
        )

    one = _one_of(kinds).flatmap(fault)
    return st.builds(
        Case,
        plant_seed=_whole(0, 0xFFFF),
        faults=st.lists(one, max_size=FAULTS_MOST).map(tuple),
    )


class _Enough(KeyboardInterrupt):
    """The search is to end now. Hypothesis takes any ordinary exception for a finding."""


def _size(case: Case) -> tuple[int, int]:
    """How large a case is: fewer faults first, then smaller numbers."""
    numbers = sum(f.start_tick + f.length_ticks + abs(f.magnitude) for f in case.faults)
    return len(case.faults), case.plant_seed + numbers


class _Search:
    """Runs each case once, remembers its verdict, and keeps within the budget of runs."""

    def __init__(
        self,
        run_case: Callable[[Case], Trace],
        proof: Proof,
        stop: Callable[[], bool],
        progress: Callable[[Proof], None],
    ) -> None:
        self.run_case = run_case
        self.proof = proof
        self.stop = stop
        self.progress = progress
        self.known: dict[Case, list[Broken]] = {}

    def breaks(self, case: Case) -> bool:
        """Whether a case breaks what the first failure broke (before there is one: anything)."""
        proof = self.proof
        if case not in self.known:
            if self.stop():
                proof.interrupted = True
                raise _Enough
            if proof.broken is not None and proof.shrink_runs >= SHRINKS * proof.tries:
                raise _Enough
            self.known[case] = self._run(case)
            self.progress(proof)
        for broken in self.known[case]:
            if proof.broken is None or broken.invariant == proof.broken.invariant:
                if proof.case is None or _size(case) < _size(proof.case):
                    proof.broken, proof.case = broken, case
                return True
        return False

    def _run(self, case: Case) -> list[Broken]:
        proof = self.proof
        if proof.broken is None:
            proof.cases += 1
            proof.fault_kinds.update(fault.kind for fault in case.faults)
        else:
            proof.shrink_runs += 1
        try:
            trace = self.run_case(case)
        except (RigError, ScheduleError):
            raise
        except Exception as fault:  # whatever ends a run from within is a finding
            return [Broken("run_completes", 0, f"{type(fault).__name__}: {fault}", "a run to its end")]
        if proof.broken is None:
            proof.outcomes[trace.trips[0]["name"] if trace.trips else "no trip"] += 1
            if not any(fault.blinds_pressures() for fault in case.faults):
                proof.least_margin_pa = min(proof.least_margin_pa, trace.truth["min_margin_pa"])
            proof.peak_coil_c = max(proof.peak_coil_c, trace.truth["peak_coil_c"])
        return judge(trace)


@contextmanager
def _own_folder() -> Iterator[None]:
    """Hypothesis keeps notes about sources; not in the user's folder."""
    with tempfile.TemporaryDirectory(prefix="lodestroke-") as folder:
        set_hypothesis_home_dir(folder)
        try:
            yield
        finally:
            set_hypothesis_home_dir(None)


def search(
    rig: Rig,
    ticks: int,
    run_case: Callable[[Case], Trace],
    *,
    tries: int = 60,
    seed: int = 0,
    stop: Callable[[], bool] = lambda: False,
    progress: Callable[[Proof], None] = lambda proof: None,
) -> Proof:
    """Try so many cases of a program of so many ticks; the same seed tries the same ones.

    The first failure is shrunk; Proof.broken and .case then hold the smallest found that breaks the
    same invariant. RigError and ScheduleError pass; any other error of a run is a failure itself.
    """
    proof = Proof(tries)
    looking = _Search(run_case, proof, stop, progress)
    how: Any = settings(
        max_examples=tries,
        database=None,
        deadline=None,
        derandomize=False,
        print_blob=False,
        verbosity=Verbosity.quiet,
        phases=(Phase.generate, Phase.shrink),
        suppress_health_check=list(HealthCheck),
    )
    try:
        with _own_folder():
            case = find(cases(rig, ticks), looking.breaks, settings=how, random=random.Random(seed))
    except (NoSuchExample, _Enough):
        return proof
    assert proof.broken is not None
    name = proof.broken.invariant
    proof.case = case
    proof.broken = next(broken for broken in looking.known[case] if broken.invariant == name)
    return proof
