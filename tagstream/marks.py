"""Marks: what their keys and values may be, and those that a run remembers.

A mark says that from an instant on a key has a value: a stage position, a polarisation, a power.
A number and a text are different values, also where they read alike: 1 is not "1". Numbers are
equal as floats are.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable
from math import isfinite
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from tagstream.recording.layout import Mark

Value = float | str

KEY_BYTES = 32
TEXT_BYTES = 64
UNMARKED = "unmarked"  # the value of a key before its first mark; setting it goes back to that
OTHER = "other"  # stands for all values beyond the limit of a tally
MOST_MARKS = 10_000  # that a run remembers; all of them are in its recording and its log
MOST_KEYS = 256  # whose last mark is remembered although it is older than those


def key_problem(key: str) -> str | None:
    """Why `key` can be no key of a mark, or None if it can."""
    if 0 < len(key.encode()) <= KEY_BYTES and key.isprintable() and "/" not in key and key != ".":
        return None
    return f"key {key!r}: right would be 1 to {KEY_BYTES} bytes without / or control characters"


def value_problem(key: str, value: Value) -> str | None:
    """Why `value` can be no value of a mark, or None if it can."""
    if not isinstance(value, str):
        return None if isfinite(value) else f"value of {key}: {value}; right would be finite"
    size = len(value.encode())
    if size > TEXT_BYTES:
        return f"value of {key}: {size} bytes; right would be at most {TEXT_BYTES}"
    if not value.isprintable():
        return f"value of {key}: {value!r}; right would be printable characters"
    return None


def parsed_value(text: str) -> Value:
    """A value as a person writes it: a number where it is a finite one, else the text."""
    try:
        number = float(text)
    except ValueError:
        return text
    return number if isfinite(number) else text


def value_text(value: Value) -> str:
    """A value for people; of a number all digits that tell it from others, and no more."""
    return value if isinstance(value, str) else repr(float(value)).removesuffix(".0")


class RememberedMarks:
    """The newest marks, and of each key the last, however old."""

    def __init__(self) -> None:
        self._newest: deque[Mark] = deque()
        self._older: dict[str, Mark] = {}  # the last of each key that left `_newest`

    def add(self, marks: Iterable[Mark]) -> None:
        """Take marks in the order in which they were set."""
        for mark in marks:
            self._newest.append(mark)
            if len(self._newest) > MOST_MARKS:
                self._retire(self._newest.popleft())

    def _retire(self, mark: Mark) -> None:
        self._older.pop(mark.key, None)
        self._older[mark.key] = mark
        if len(self._older) > MOST_KEYS:
            del self._older[next(iter(self._older))]

    def all(self) -> tuple[Mark, ...]:
        """What is remembered, in the order in which it was set."""
        keys = {mark.key for mark in self._newest} if self._older else set()
        older = [mark for key, mark in self._older.items() if key not in keys]
        return (*older, *self._newest)
