"""Raw tags kept while a run goes on, in segments; results go on whatever happens to them."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from tagstream.errors import ResultsError
from tagstream.outputs.segments import drop_oldest, next_number, segment_path
from tagstream.recording import RecordingHeader, RecordingWriter
from tagstream.recording.layout import Mark
from tagstream.settings.sections import Recording
from tagstream.units import format_bytes

FLUSH_S = 2.0  # what a crash may take of an open segment
BYTES_A_TAG = 5
RETRY_S = 5.0  # how long a pause lasts at least


class Piece(Protocol):
    """A piece of the stream as decoded, in arrival order."""

    @property
    def times_ps(self) -> NDArray[np.int64]: ...
    @property
    def inputs(self) -> NDArray[Any]: ...
    @property
    def begin_ps(self) -> int | None: ...
    @property
    def end_ps(self) -> int | None: ...
    @property
    def complete(self) -> bool: ...
    @property
    def gap_before(self) -> bool: ...
    @property
    def lossy(self) -> bool: ...
    @property
    def marks(self) -> tuple[Mark, ...]: ...


@dataclass(frozen=True, slots=True)
class Recorded:
    """What is recorded. folder: of the segments. header: of the first one. tick: native, in ps."""

    folder: Path
    header: RecordingHeader
    tick: Fraction


class Recorder:
    """Writes pieces into segments, in the thread that does all HDF5.

    event: tells the log. free: bytes left on the disk of a folder. What cannot be written pauses
    the recording and is counted; the next segment begins with a gap.
    """

    def __init__(
        self,
        settings: Recording,
        event: Callable[..., None],
        free: Callable[[Path], int],
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self._settings, self._event, self._free, self._clock = settings, event, free, clock
        self._into: Recorded | None = None
        self._writer: RecordingWriter | None = None
        self._number = 0
        self._begin_ps: int | None = None  # stream time at which the open segment begins
        self._flushed_s = self._paused_s = clock()
        self._hole = self._wide = False  # something was not recorded; inputs above 255 were seen
        self._lost_tags = 0
        self._hole_s = 0.0
        self._bytes = 0
        self._numbers: dict[str, int | float | str] = {"recording": "off"}

    def open(self, into: Recorded) -> None:
        """Where pieces go from now on; another run, another folder."""
        self.close()
        self._into, self._number = into, next_number(into.folder) - 1
        self._look()

    def take(self, piece: Piece) -> None:
        """Record a piece; or count it as not recorded."""
        if self._writer is not None and not self._has_room():
            self._guarded(self._end_segment)
        if self._into is None or not (self._writer is not None or self._begin(piece)):
            self._lose(piece)
            self._look()
            return
        try:
            self._write(piece)
        except ResultsError as error:
            self._pause(str(error))
            self._lose(piece)
        self._look()

    def lose(self, piece: Piece) -> None:
        """A piece that came while too many waited: it is not recorded."""
        self._lose(piece)
        self._look()

    def idle(self) -> None:
        """Nothing comes: what was recorded is brought to the disk."""
        if self._writer is not None and self._clock() - self._flushed_s >= FLUSH_S:
            self._guarded(self._flush)

    def close(self) -> None:
        """Close the open segment under its final name."""
        if self._writer is not None:
            self._guarded(self._end_segment)

    def numbers(self) -> dict[str, int | float | str]:
        """For the health; from any thread. recording ("on", "paused", "off"), recording_segment,
        recording_bytes (of this run), recording_hole_s, recording_not_recorded (tags)."""
        return self._numbers

    def _write(self, piece: Piece) -> None:
        assert self._writer is not None
        if not self._wide and piece.inputs.dtype != np.uint8 and piece.inputs.size:
            self._wide = int(piece.inputs.max()) > 255
            if self._wide:
                self._end_segment()
                self._start()
        for mark in piece.marks:
            self._writer.add_mark(mark)
        gap = piece.gap_before or self._hole
        self._hole = False
        self._writer.add(
            piece.times_ps,
            piece.inputs if self._wide else piece.inputs.astype(np.uint8, copy=False),
            piece.begin_ps,
            piece.end_ps,
            piece.complete,
            gap,
            piece.lossy,
        )
        self._bytes += BYTES_A_TAG * piece.times_ps.size
        if piece.complete and self._is_full(piece):
            self._end_segment()
        elif self._clock() - self._flushed_s >= FLUSH_S:
            self._flush()

    def _is_full(self, piece: Piece) -> bool:
        assert self._writer is not None
        if self._writer.count * BYTES_A_TAG >= self._settings.segment:
            return True
        limit = self._settings.segment_time_ps
        reached = piece.end_ps
        if reached is None and piece.times_ps.size:
            reached = int(piece.times_ps[-1])
        if limit is None or reached is None:
            return False
        self._begin_ps = reached if self._begin_ps is None else self._begin_ps
        return reached - self._begin_ps >= limit

    def _begin(self, piece: Piece) -> bool:
        """Open a segment if there is room."""
        if self._hole and self._clock() - self._paused_s < RETRY_S:
            return False
        if not self._has_room():
            self._pause(f"less than {format_bytes(self._settings.min_free)} free (min_free)")
            return False
        if not self._guarded(self._start):
            return False
        if self._hole:
            self._event("recording_resumed", tags_not_recorded=self._lost_tags)
        self._begin_ps = piece.begin_ps
        return True

    def _has_room(self) -> bool:
        assert self._into is not None
        return self._free(self._into.folder) >= self._settings.min_free

    def _start(self) -> None:
        assert self._into is not None
        self._number += 1
        header = replace(
            self._into.header, segment=self._number, not_recorded_s=round(self._hole_s, 6)
        )
        path = segment_path(self._into.folder, self._number)
        self._writer = RecordingWriter(
            path, tick=self._into.tick, inputs_above_255=self._wide, header=header
        )
        self._flushed_s, self._begin_ps = self._clock(), None

    def _flush(self) -> None:
        assert self._writer is not None
        self._flushed_s = self._clock()
        self._writer.flush()

    def _end_segment(self) -> None:
        writer, self._writer = self._writer, None
        assert writer is not None
        assert self._into is not None
        writer.close()
        self._event("segment", path=writer.path.name, tags=writer.count)
        if self._settings.keep is not None:
            for gone in drop_oldest(self._into.folder, self._settings.keep):
                self._event("segment_removed", path=gone.name)

    def _guarded(self, call: Callable[[], None]) -> bool:
        try:
            call()
        except (ResultsError, OSError, RuntimeError) as error:
            self._pause(str(error))
            return False
        return True

    def _pause(self, why: str) -> None:
        """The open segment, if any, is left as it is: `recover` makes a whole file of it."""
        if not self._hole:
            self._event("recording_paused", why=why)
        self._hole, self._paused_s = True, self._clock()
        if self._writer is not None:
            self._writer.abandon()
            self._writer = None
        self._look()

    def _lose(self, piece: Piece) -> None:
        self._hole = True
        self._lost_tags += piece.times_ps.size
        if piece.begin_ps is not None and piece.end_ps is not None and piece.complete:
            self._hole_s += (piece.end_ps - piece.begin_ps) / 1e12

    def _look(self) -> None:
        state = "off" if self._into is None else "on" if self._writer is not None else "waiting"
        self._numbers = {
            "recording": "paused" if self._hole and self._into is not None else state,
            "recording_segment": self._number,
            "recording_bytes": self._bytes,
            "recording_hole_s": round(self._hole_s, 6),
            "recording_not_recorded": self._lost_tags,
        }
