"""Tallies kept apart for each value of a key of marks.

A mark takes effect exactly at its time: a tag at that time is after it. So the tallies are cut
there, and the sums of each part are added to those of the value that was in force. A pair belongs
to the part of its later tag, as it does for slices. Where light comes after a gap, a mark in the
gap is in force from its first instant.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from itertools import takewhile
from typing import Any

from tagstream.block import Block
from tagstream.marks import OTHER, UNMARKED, Value
from tagstream.recording.layout import Mark
from tagstream.tallies import Sums, added


class ValuesInForce:
    """The values of some keys along the stream; marks of other keys change nothing.

    Marks wait until the stream reaches them; of equal times the later one to arrive holds.
    """

    def __init__(self, keys: Iterable[str]) -> None:
        self.values: dict[str, Value] = dict.fromkeys(keys, UNMARKED)
        self._waiting: list[Mark] = []

    def add(self, marks: Iterable[Mark]) -> None:
        """Take marks in the order in which they were set."""
        more = [mark for mark in marks if mark.key in self.values]
        if more:
            self._waiting = sorted([*self._waiting, *more], key=lambda mark: mark.time_ps)

    def next_change(self, until_ps: int) -> int | None:
        """When a value changes next, if before `until_ps`; marks that change nothing are let go."""
        while self._waiting and (at_ps := self._waiting[0].time_ps) < until_ps:
            due = self._due(at_ps)
            together = {mark.key: mark.value for mark in due}
            if any(self.values[key] != value for key, value in together.items()):
                return at_ps
            del self._waiting[: len(due)]
        return None

    def change(self, at_ps: int) -> None:
        """Let all marks up to `at_ps` take effect."""
        due = self._due(at_ps)
        del self._waiting[: len(due)]
        self.values |= {mark.key: mark.value for mark in due}

    def _due(self, at_ps: int) -> list[Mark]:
        return list(takewhile(lambda mark: mark.time_ps <= at_ps, self._waiting))


class SplitSums:
    """The sums of one tally over the run, for each value of a key.

    parts: value -> sums, in the order in which values were first in force; slices that have
    ended. At most `limit` values have sums of their own, besides "unmarked"; what comes beyond
    is added up as "other".
    """

    def __init__(self, key: str, limit: int) -> None:
        self.key, self._limit = key, limit
        self.parts: dict[Value, Sums] = {}
        self._of_slice: dict[Value, Sums] = {}

    def add(self, value: Value, sums: Sums) -> None:
        """Add a part of the slice that goes on, in which `value` was in force."""
        place = self._place(value)
        self._of_slice[place] = added(self._of_slice.get(place), sums)

    def end_slice(self) -> bool:
        """Add the slice to the run. Whether values were put together for the first time."""
        overflows = OTHER in self._of_slice and OTHER not in self.parts
        for place, sums in self._of_slice.items():
            self.parts[place] = added(self.parts.get(place), sums)
        self._of_slice.clear()
        return overflows

    def _place(self, value: Value) -> Value:
        places = {*self.parts, *self._of_slice}
        own = len(places - {UNMARKED, OTHER}) < self._limit
        return value if own or value in places or value == UNMARKED else OTHER


class Splits:
    """All tallies of a run that are split, and the marks that split them.

    sections: the [[tally]] sections, split or not.
    """

    def __init__(self, sections: Sequence[Any]) -> None:
        self._split = {
            section.name: SplitSums(section.split_by, section.split_limit)
            for section in sections
            if section.split_by is not None
        }
        self._in_force = ValuesInForce(split.key for split in self._split.values())

    def __iter__(self) -> Iterator[str]:
        """Names of the tallies that are split."""
        return iter(self._split)

    def __getitem__(self, tally: str) -> SplitSums:
        return self._split[tally]

    def value(self, key: str) -> Value:
        """The value in force of a key that splits a tally."""
        return self._in_force.values[key]

    def mark(self, marks: Iterable[Mark]) -> None:
        """Take marks; no block before may have reached them, else they hold from now on."""
        self._in_force.add(marks)

    def next_change(self, piece: Block) -> int | None:
        """When a value changes in `piece`, or at or before its begin; None if none does."""
        return self._in_force.next_change(max(piece.end_ps, piece.begin_ps + 1))

    def change(self, at_ps: int) -> None:
        """Let marks up to `at_ps` take effect; the sums of what came before have been added."""
        self._in_force.change(at_ps)

    def add(self, sums: Mapping[str, Sums]) -> None:
        """Add the sums of a part of a slice, by name of tally, to the values in force."""
        for name, split in self._split.items():
            split.add(self.value(split.key), sums[name])

    def end_slice(self) -> list[str]:
        """End a slice; the tallies that from this one on put values together as "other"."""
        return [name for name, split in self._split.items() if split.end_slice()]

    def restore(self, tally: str, parts: Mapping[Value, Sums]) -> None:
        """Go on from sums that an earlier process had added up; marks are to be given again."""
        self._split[tally].parts = dict(parts)
