"""The only file that knows which interpreter runs: MicroPython on a board, CPython on a bench computer."""

MICROPYTHON = True
try:
    import gc

    from micropython import const as const
    from micropython import heap_lock as heap_lock
    from micropython import heap_unlock as heap_unlock

    collect = gc.collect

    def collect_often(every_bytes: int) -> None:
        """Collect garbage after so many bytes; -1 gives the interpreter's own way back."""
        gc.threshold(every_bytes)

except ImportError:
    MICROPYTHON = False

    def const(value):  # type: ignore
        return value

    def heap_lock():  # type: ignore
        """CPython has no heap lock; the real interpreter proves that nothing allocates."""

    def heap_unlock():  # type: ignore
        return 0

    def collect():  # type: ignore
        return 0

    def collect_often(every_bytes: int) -> None:
        """CPython looks after its memory by itself."""
