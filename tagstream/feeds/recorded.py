"""Recordings as feeds: one file, or the segments of one run."""

from __future__ import annotations

from collections.abc import Generator, Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream import units
from tagstream.errors import InputError, SettingsError
from tagstream.feeds import Arrivals, TimeBase
from tagstream.recording import Mark, RecordedPiece, RecordingHeader, RecordingReader
from tagstream.settings.feeds import RecordingFeed as RecordingSettings


@dataclass(frozen=True, slots=True)
class _Segment:
    path: Path
    header: RecordingHeader
    tick: Fraction
    count: int
    foreign: bool


class RecordingsFeed:
    """The segments of one run, one after the other.

    paths: files in any order; they are sorted by segment number, and a missing number is a
    gap. group: path of the NXevent_data group; absent: the first one of each file.
    Raises SettingsError when the files are not of one run, InputError when one is unreadable.
    """

    def __init__(self, paths: Sequence[Path], slice_ps: int, group: str | None = None) -> None:
        self._slice_ps, self._group = slice_ps, group
        self._segments = _in_order([_describe(path, group) for path in paths])
        self._total = sum(segment.count for segment in self._segments)
        self._delivered = 0
        self._shift: units.TickScale | None = None

    def pieces(self) -> Generator[Arrivals]:
        """As `Feed.pieces`."""
        gap, self._delivered = False, 0
        for number, segment in enumerate(self._segments):
            gap |= number > 0 and segment.header.segment != self._number(number - 1) + 1
            with RecordingReader(segment.path, self._group) as reader:
                marks = reader.marks()
                for piece in reader.pieces():
                    self._delivered += piece.times_ps.size
                    if not self._placed(piece):
                        continue
                    yield self._arrivals(piece, gap, marks)
                    gap, marks = False, []
        if self._shift is None:
            raise InputError(f"{self._segments[0].path}: holds no tags and no intervals")

    def _number(self, index: int) -> int:
        return self._segments[index].header.segment

    def _placed(self, piece: RecordedPiece) -> bool:
        """Whether the origin is known: it is fixed by the first interval, else the first tag."""
        if self._shift is None:
            first = piece.begin_ps
            if first is None:
                if piece.times_ps.size == 0:
                    return False  # nothing is known yet, not even a gap has two sides
                first = int(piece.times_ps[0])
            self._shift = units.TickScale(Fraction(1), first, self._slice_ps)
        return True

    def _arrivals(self, piece: RecordedPiece, gap: bool, marks: list[Mark]) -> Arrivals:
        """The first piece of a segment carries its marks; they wait for their time."""
        return Arrivals(
            self._moved(piece.times_ps),
            piece.inputs,
            self._moved_one(piece.begin_ps),
            self._moved_one(piece.end_ps),
            piece.complete,
            piece.gap_before or gap,
            piece.lossy,
            marks=tuple(replace(m, time_ps=m.time_ps - self._origin_ps) for m in marks),
        )

    @property
    def _origin_ps(self) -> int:
        return 0 if self._shift is None else self._shift.origin_ps

    def _moved(self, times_ps: NDArray[np.int64]) -> NDArray[np.int64]:
        if self._shift is None or self._origin_ps == 0:
            return times_ps
        moved = self._shift.to_ps(times_ps)
        beyond = np.abs(times_ps) > units.TIME_LIMIT_PS
        moved[beyond] = times_ps[beyond]
        return moved

    def _moved_one(self, time_ps: int | None) -> int | None:
        return None if time_ps is None else time_ps - self._origin_ps

    @property
    def time_base(self) -> TimeBase:
        """As `Feed.time_base`."""
        first = self._segments[0]
        ticks, utc = first.header.moved(self._origin_ps, first.tick)
        own_uuid = None if first.foreign else first.header.run_uuid
        return TimeBase(first.tick, ticks, utc, own_uuid)

    @property
    def notes(self) -> list[str]:
        """What a reader of a replay has to know."""
        missing = max(segment.header.not_recorded_s for segment in self._segments)
        if not missing:
            return []
        return [f"not comparable with the run itself: {missing:g} s of it were not recorded"]

    @property
    def truth(self) -> dict[str, Any]:
        """As `Feed.truth`: what a simulation wrote into its recording."""
        return dict(self._segments[0].header.truth)

    @property
    def progress(self) -> float | None:
        """As `Feed.progress`."""
        return self._delivered / self._total if self._total else None


class RecordingFeed(RecordingsFeed):
    """One recording, as the [feed] section names it."""

    def __init__(self, settings: RecordingSettings, slice_ps: int) -> None:
        super().__init__([settings.path], slice_ps, settings.group)


def _describe(path: Path, group: str | None) -> _Segment:
    with RecordingReader(path, group) as reader:
        return _Segment(path, reader.header, reader.tick, reader.count, reader.foreign)


def _in_order(segments: list[_Segment]) -> list[_Segment]:
    """Sorted by segment number. Raises SettingsError unless all are of one run, each once."""
    if problems := list(_problems(segments)):
        raise SettingsError(problems)
    return sorted(segments, key=lambda segment: segment.header.segment)


def _problems(segments: list[_Segment]) -> Iterator[str]:
    """Why the files are no run."""
    if not segments:
        yield "no recording; right would be the path of one, or of several of one run"
        return
    seen: dict[int, Path] = {}
    for segment in segments:
        number = segment.header.segment
        if segment.foreign and len(segments) > 1:
            yield (
                f"{segment.path}: was written by another program, so that no other file can"
                " continue it; replay them one by one"
            )
        elif segment.header.run_uuid != segments[0].header.run_uuid:
            yield (
                f"{segment.path}: is of another run than {segments[0].path}; replay them one by one"
            )
        elif number in seen:
            yield (
                f"{segment.path}: is segment {number} of the run, as is {seen[number]}; right"
                " would be each segment once"
            )
        seen.setdefault(number, segment.path)
