"""An integer that refuses to leave the small integers of a 32-bit board (-2**30 to 2**30 - 1).

On such a board a larger result is allocated, which fails under the locked heap; CPython and the
64-bit interpreter hide it. Every operator, and its reflected form, checks and wraps again.
"""

from __future__ import annotations

import operator


class OutOfSmallInt(AssertionError):
    """A result that a 32-bit board would have to allocate."""


class I30(int):
    """See the module."""

    def __new__(cls, value: int = 0) -> I30:
        if not -(1 << 30) <= int(value) < (1 << 30):
            raise OutOfSmallInt(f"{int(value)} leaves 31 bits")
        return super().__new__(cls, value)


def _binary(name: str, reflected: bool):
    plain = getattr(operator, {"and": "and_", "or": "or_"}.get(name, name))

    def method(self: I30, other: object):
        if not isinstance(other, int):
            return NotImplemented
        a, b = (int(other), int(self)) if reflected else (int(self), int(other))
        return I30(plain(a, b))

    return method


for _name in ("add", "sub", "mul", "floordiv", "mod", "lshift", "rshift", "and", "or", "xor"):
    setattr(I30, f"__{_name}__", _binary(_name, False))
    setattr(I30, f"__r{_name}__", _binary(_name, True))
for _name, _plain in (
    ("neg", operator.neg), ("pos", operator.pos), ("abs", operator.abs), ("invert", operator.invert)
):
    setattr(I30, f"__{_name}__", lambda self, plain=_plain: I30(plain(int(self))))


def listed(values) -> list[I30]:
    """An array's content as checking integers."""
    return [I30(value) for value in values]
