"""Every place in a recording: what it holds, its type, its unit.

A recording is an HDF5 file in the open NeXus conventions. Times are ps of stream time.

    /                            NXroot     @default = "run"
    /run                         NXentry    @default = "events"
      title, start_time, end_time           text, ISO 8601; start_time is when the file was made
      program_name                          text; @version
      entry_identifier_uuid                 text: the run, the same in all its segments
      segment                               int64: 1 for the first file of a run
      native_tick                           text: "1 ps", "1/8192 s"
      origin_ticks                          decimal text: native count at stream time zero, if known
      origin_utc                            text, ISO 8601: wall time of stream time zero, if known
      not_recorded_s             float64: stream time before this segment that was counted, but not
                                 recorded, if any
      truth                      NXnote     JSON: what a simulation knows of itself, if anything
    /run/events                  NXevent_data, the tags as decoded, in arrival order
      event_id                   n, uint8 or uint16: number of the input
      event_time_offset          n, uint32 ps after the zero of its group
      event_time_zero            g, int64 ps: smallest time of the group; @offset = origin_utc
      event_index                g, int64: first tag of the group
      cue_timestamp_zero         c, int64 ps: event_time_zero of a group now and then; @start
      cue_index                  c, int64: first tag of that group
    /run/coverage                NXcollection, one row for each interval or piece of one; @layout
      begin, end                 r, int64 ps: the interval of which the source vouches that all
                                 its tags are here; without vouching the span of the tags
      first_event                r, int64: first tag that arrived with it
      flags                      r, uint8: sum of 1 vouched, 2 gap before, 4 lossy, 8 complete
    /run/gaps                    NXlog: time (begin of a gap, int64 ps), value (length, int64 ps)
    /run/mark_table              m, compound: time_ps int64, key S32, number float64, text S64
    /run/settled                 6, int64: how much of a recording that was never closed is whole:
                                 tags, groups, cues, rows of coverage, gaps, marks
    /run/marks                   NXcollection of an NXlog (numbers) or NXtextlog for each key

A group ends where its spread would reach 2**32 ps, at the end of an interval, and where the
program that wrote it handed over a new piece. Zeros need not rise. A time past the limit of 106
days is kept as `units.BEYOND_LIMIT_PS` or its negative, exactly.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

LAYOUT = 1  # rises when an older reader would misread
ENTRY = "run"
EVENTS = "events"
COVERAGE = "coverage"
GAPS = "gaps"
MARKS = "marks"
MARK_TABLE = "mark_table"

CHUNK_EVENTS = 1 << 18  # larger chunks were no faster, smaller ones were slower to read
CHUNK_ROWS = 1 << 12
# What SWMR needs, and any HDF5 from 1.10 on reads. Never "latest": what HDF5 2 then writes, 1.14
# cannot read.
LIBVER = ("v110", "v110")
SETTLED = "settled"

VOUCHED, GAP_BEFORE, LOSSY, COMPLETE = 1, 2, 4, 8
MARK_DTYPE = np.dtype([("time_ps", "<i8"), ("key", "S32"), ("number", "<f8"), ("text", "S64")])


@dataclass(frozen=True, slots=True)
class RecordedPiece:
    """Tags in arrival order with what their source said of the interval they came in.

    times_ps: int64, n, stream time. inputs: uint8 or uint16, n.
    begin_ps, end_ps: the half-open interval of which the source vouches, or both None.
    complete: the last piece of its interval. gap_before: tags may have been lost just before.
    lossy: tags of this interval itself were lost.
    """

    times_ps: NDArray[np.int64]
    inputs: NDArray[np.uint8] | NDArray[np.uint16]
    begin_ps: int | None
    end_ps: int | None
    complete: bool
    gap_before: bool
    lossy: bool


@dataclass(frozen=True, slots=True)
class Mark:
    """A key and value that somebody set during the run. value: a number or a text."""

    time_ps: int
    key: str
    value: float | str
