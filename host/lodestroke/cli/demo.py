"""`lodestroke demo`: the whole line, step by step, each with the command for that step alone."""

from __future__ import annotations

import contextlib
import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import click

from ..errors import Exit, Interrupted, LodestrokeError, LogbookError
from .common import fail, say

_STEP_S = 60.0


@click.command()
@click.option(
    "--out", metavar="FOLDER", help="A new folder for everything; ./lodestroke-demo-N otherwise."
)
def command(out: str | None) -> None:
    """Check, dry-run, flash, endure with an interruption, and report, on a virtual bench."""
    try:
        Demo(_folder(out)).run()
    except KeyboardInterrupt:
        fail(Interrupted("the demo was interrupted; nothing is left running"))
    except LodestrokeError as error:
        fail(error)


def _folder(out: str | None) -> Path:
    if out is not None:
        folder = Path(out)
        if folder.exists() and (not folder.is_dir() or any(folder.iterdir())):
            raise DemoError(
                "the demo wants a folder of its own",
                at="--out",
                got=str(folder),
                bound="a new or empty folder",
                try_="name another",
            )
    else:
        number = 1
        while Path(f"lodestroke-demo-{number}").exists():
            number += 1
        folder = Path(f"lodestroke-demo-{number}")
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as fault:
        raise DemoError(
            "the demo's folder cannot be made",
            at=str(folder),
            got=str(fault),
            bound="a folder that can be written",
            try_="name another with --out",
        ) from fault
    return folder


class DemoError(LodestrokeError):
    """A step of the demo did not do what it should."""

    exit_code = Exit.BAD_INPUT


class Demo:
    """Runs the real command for each step, as a user would."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder.resolve()
        self.started = time.monotonic()
        self.number = 0
        self.rig = "hil_configs/bench-sim.toml"
        self.log = "bench.db"
        self.environment = {**os.environ, "COLUMNS": "100"}
        self.environment.pop("LODESTROKE_LOGBOOK", None)

    def run(self) -> None:
        """All steps in order."""
        from ..shipped import hil_configs_dir
        from ..virtual.interpreter import interpreter_path

        shutil.copytree(hil_configs_dir(), self.folder / "hil_configs", dirs_exist_ok=True)
        say(f"Everything is in {self.folder}; each step shows the command that does it alone.")
        gentle = "hil_configs/schedules/gentle.toml"
        self.step("Price the rig and prove the schedule before power", "check", self.rig, gentle)
        self.step(
            "Dry-run the gentle schedule on the twin (the first time compiles the plant)",
            "dry-run",
            self.rig,
            gentle,
            "--out",
            "gentle",
        )
        self.step(
            "Dry-run one that would blow the outlet valve: the interlock stops it",
            "dry-run",
            self.rig,
            "hil_configs/schedules/overdrive.toml",
            "--out",
            "overdrive",
            expect=Exit.TRIPPED,
        )
        try:
            interpreter_path()
        except LodestrokeError as missing:
            say("\n" + missing.text())
            say("The rest of the demo needs a virtual board; the twin's pages above are complete.")
            return
        with self.board():
            self.endurance()
        self.finish()

    def endurance(self) -> None:
        """Flash, run a plan, interrupt it, resume it."""
        plan = "hil_configs/plans/short.toml"
        self.step(
            "Flash the firmware onto the virtual board, through mpremote",
            "flash",
            self.rig,
            "--port",
            "pump",
        )
        self.step(
            "Start the endurance test, and interrupt it with Ctrl-C after a dozen cycles",
            "--logbook",
            self.log,
            "endure",
            self.rig,
            plan,
            "--port",
            "pump",
            interrupt_after=12,
            expect=Exit.INTERRUPTED,
        )
        self.step(
            "Resume it to its end",
            "--logbook",
            self.log,
            "endure",
            self.rig,
            plan,
            "--port",
            "pump",
            "--resume",
        )

    def finish(self) -> None:
        """Verify, report, say where things are."""
        self.step("Prove the logbook whole", "--logbook", self.log, "log", "verify")
        self.step(
            "Write the report", "--logbook", self.log, "report", "last", "--out", "report.html"
        )
        seconds = time.monotonic() - self.started
        say(f"\nDone in {seconds:.0f} s. The report: {self.folder / 'report.html'}")
        say(
            f"Dry-run pages: {self.folder / 'gentle' / 'dry-run.html'}, "
            f"{self.folder / 'overdrive' / 'dry-run.html'}"
        )

    def step(
        self,
        what: str,
        *arguments: str,
        expect: int = Exit.DONE,
        interrupt_after: int | None = None,
    ) -> None:
        """One command, its output shown; it must end with the exit code expected."""
        self.number += 1
        say(f"\n{self.number}. {what}\n   $ lodestroke {' '.join(arguments)}")
        process = self._start(*arguments)
        try:
            if interrupt_after is not None:
                self._wait_for_cycles(interrupt_after, process)
                process.send_signal(signal.SIGINT)
            code = process.wait(_STEP_S)
        except subprocess.TimeoutExpired as fault:
            raise DemoError(
                "a step of the demo takes too long",
                at=" ".join(arguments),
                got=f"over {_STEP_S:g} s",
                bound=f"{_STEP_S:g} s",
                try_="run the step alone to see why",
            ) from fault
        finally:
            _end(process)
        if code != expect:
            raise DemoError(
                "a step of the demo ended otherwise than it should",
                at=" ".join(arguments),
                got=f"exit code {code}",
                bound=f"exit code {int(expect)}",
                try_="run the step alone to see why",
            )

    def _wait_for_cycles(self, cycles: int, process: subprocess.Popen[bytes]) -> None:
        """Until so many are in the logbook, or the step has ended, or its time is over."""
        from ..logbook import open_logbook, reader

        end = time.monotonic() + _STEP_S
        while process.poll() is None and time.monotonic() < end:
            time.sleep(0.2)
            if not (self.folder / self.log).exists():
                continue
            with contextlib.suppress(LogbookError):  # it may be half made yet
                book = open_logbook(self.folder / self.log, create=False)
                if reader.runs(book) and reader.last_cycle(book, "r0001") >= cycles:
                    return

    def _start(self, *arguments: str) -> subprocess.Popen[bytes]:
        return subprocess.Popen(
            [sys.executable, "-m", "lodestroke.cli.main", *arguments],
            cwd=self.folder,
            env=self.environment,
        )

    @contextlib.contextmanager
    def board(self):  # type: ignore[no-untyped-def]
        """A virtual board for the rest of the demo, with the name `pump` in its folder."""
        self.number += 1
        arguments = ("board", self.rig, "--link", "pump")
        say(
            f"\n{self.number}. Start a virtual board: a real MicroPython behind a serial port"
            f"\n   $ lodestroke {' '.join(arguments)} &"
        )
        process = self._start(*arguments)
        try:
            end = time.monotonic() + _STEP_S
            while not (self.folder / "pump").exists() and time.monotonic() < end:
                if process.poll() is not None:
                    raise DemoError(
                        "the virtual board did not start",
                        at=" ".join(arguments),
                        got=f"exit code {process.returncode}",
                        bound="a running board",
                        try_="run the step alone to see why",
                    )
                time.sleep(0.05)
            yield
        finally:
            _end(process)


def _end(process: subprocess.Popen[bytes]) -> None:
    """Leave no process behind: ask, wait, then kill."""
    if process.poll() is None:
        process.terminate()
        try:
            process.wait(10.0)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
