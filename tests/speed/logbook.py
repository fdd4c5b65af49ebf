"""What logging costs: sample rows into chunks, against the csv module writing the same numbers.

    python tests/speed/logbook.py
"""

from __future__ import annotations

import csv
import struct
import tempfile
import time
from pathlib import Path

from lodeboard.wire import messages
from lodestroke.logbook import Writer, new_run, open_logbook, reader
from lodestroke.logbook.export import export
from lodestroke.logbook.verify import verify

ROWS = 400_000
CYCLE = next(fields for _, name, _, fields in messages.UP if name == "cycle")


def rows() -> list[bytes]:
    """A noisy wave, packed as a board sends it; made up before the clock starts."""
    noise = [hash((tick, 7)) % 9 - 4 for tick in range(997)]
    return [
        struct.pack(
            messages.SAMPLE_FORMAT, tick, abs(tick % 500 - 250) * 4 + noise[tick % 997], 0, 900,
            tick % 8000, tick % 1300 + 3 * noise[tick % 991], 430 + noise[tick % 983], 0,
            2200 + tick // 5000, 255, 3,
        )
        for tick in range(ROWS)
    ]


def into_logbook(folder: Path, made: list[bytes]) -> float:
    """Row by row as they come off the link, flushed every 4,000; seconds."""
    log = open_logbook(folder / "speed.db")
    with Writer(log, new_run(log, "run")) as writer:
        start = time.perf_counter()
        for at, row in enumerate(made):
            writer.samples(row)
            if at % 4000 == 0:
                writer.flush(whole=False)
        writer.flush()
        return time.perf_counter() - start


def into_csv(folder: Path, made: list[bytes]) -> float:
    """The plain way: unpack each row, write it as text; seconds."""
    start = time.perf_counter()
    with (folder / "speed.csv").open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        for row in made:
            writer.writerow(struct.unpack(messages.SAMPLE_FORMAT, row))
    return time.perf_counter() - start


def cycles_a_second(folder: Path) -> tuple[float, float]:
    """Cycles with a flush each, and a thousand a flush."""
    log = open_logbook(folder / "cycles.db")
    found = []
    for count, every in ((300, 1), (20_000, 1000)):
        with Writer(log, new_run(log, "endure")) as writer:
            start = time.perf_counter()
            for number in range(1, count + 1):
                writer.cycle(dict.fromkeys(CYCLE, number))
                if number % every == 0:
                    writer.flush()
            found.append(count / (time.perf_counter() - start))
    return found[0], found[1]


def main() -> None:
    """Print the figures."""
    made = rows()
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        ours, plain = into_logbook(folder, made), into_csv(folder, made)
        size = (folder / "speed.db").stat().st_size
        print(f"samples into chunks  {ROWS / ours:12,.0f} rows/s, {size / ROWS:.1f} bytes a row")
        print(f"csv module           {ROWS / plain:12,.0f} rows/s, "
              f"{(folder / 'speed.csv').stat().st_size / ROWS:.1f} bytes a row")
        print(f"ratio                {plain / ours:12.1f} times as fast as csv")
        log = open_logbook(folder / "speed.db")
        for what, act in (
            ("read back", lambda: reader.samples(log, "r0001")),
            ("verify", lambda: verify(log)),
            ("export to csv", lambda: export(log, "r0001", "csv", folder / "csv")),
            ("export to parquet", lambda: export(log, "r0001", "parquet", folder / "parquet")),
        ):
            start = time.perf_counter()
            act()
            print(f"{what:<20} {ROWS / (time.perf_counter() - start):12,.0f} rows/s")
        one, many = cycles_a_second(folder)
        print(f"cycles, flush each   {one:12,.0f} a second\ncycles, 1000 a flush {many:12,.0f} a second")


if __name__ == "__main__":
    main()
