"""Ctrl-C and SIGTERM as a flag that loops look at, so that every end is a safe, recorded one."""

from __future__ import annotations

import contextlib
import signal
from types import FrameType, TracebackType


class StopFlag:
    """`with StopFlag() as flag:` – `flag.raised` says that somebody wants an end."""

    def __init__(self) -> None:
        self.raised = False
        self.signal_name = ""
        self._before: dict[int, object] = {}

    def __enter__(self) -> StopFlag:
        for number in (signal.SIGINT, signal.SIGTERM):
            # elsewhere than in the main thread, whoever owns that looks after signals
            with contextlib.suppress(ValueError):
                self._before[number] = signal.signal(number, self._take)
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        for number, handler in self._before.items():
            signal.signal(number, handler)  # type: ignore[arg-type]

    def _take(self, number: int, _frame: FrameType | None) -> None:
        self.raised = True
        self.signal_name = signal.Signals(number).name
