"""Recordings for tests, and what one finds in them."""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
from hypothesis import strategies as st

from tagstream.recording import RecordedPiece, RecordingReader, RecordingWriter
from tests.strategies import int64

Tags = list[tuple[int, int]]
# (begin, end, lossy), gap before, complete, tags
Row = tuple[tuple[int | None, int | None, bool], bool, bool, Tags]


def piece(
    tags: Tags,
    interval: tuple[int, int] | None = None,
    complete: bool = True,
    gap_before: bool = False,
    lossy: bool = False,
) -> RecordedPiece:
    """A piece from (time, input)."""
    begin, end = interval or (None, None)
    inputs = np.array([i for _, i in tags], np.uint8)
    return RecordedPiece(
        int64([t for t, _ in tags]), inputs, begin, end, complete, gap_before, lossy
    )


def write(path: Path, pieces: Iterable[RecordedPiece], **fields: Any) -> Path:
    """A closed recording of `pieces`."""
    with RecordingWriter(path, tick=Fraction(1), **fields) as writer:
        for p in pieces:
            writer.add(
                p.times_ps, p.inputs, p.begin_ps, p.end_ps, p.complete, p.gap_before, p.lossy
            )
    return path


def read(path: Path, group: str | None = None) -> list[RecordedPiece]:
    """All pieces of a recording."""
    with RecordingReader(path, group) as reader:
        return list(reader.pieces())


def tags_of(pieces: Iterable[RecordedPiece]) -> Tags:
    """(time, input) of all tags."""
    return [tag for p in pieces for tag in zip(p.times_ps.tolist(), p.inputs.tolist(), strict=True)]


def rows_of(pieces: Iterable[RecordedPiece]) -> list[Row]:
    """Pieces of one interval joined: what must survive, however the stream is cut."""
    rows: list[Row] = []
    for p in pieces:
        key = (p.begin_ps, p.end_ps, p.lossy)
        vouched = p.begin_ps is not None
        joins = rows and rows[-1][0] == key and not p.gap_before
        if joins and not (vouched and rows[-1][2]):
            before = rows.pop()
            rows.append((key, before[1], p.complete or not vouched, before[3] + tags_of([p])))
        else:
            rows.append((key, p.gap_before, p.complete or not vouched, tags_of([p])))
    return rows


times = (
    st.integers(-(2**20), 2**20)
    | st.integers(0, 2**34)
    | st.integers(-(106 * 86_400 * 10**12) - 1, 106 * 86_400 * 10**12 + 1)
)
some_tags = st.lists(st.tuples(times, st.integers(0, 255)), max_size=8)
intervals = st.none() | st.tuples(st.integers(0, 3), st.integers(0, 2)).map(
    lambda pair: (pair[0] * 1000, (pair[0] + pair[1]) * 1000)
)
pieces = st.lists(
    st.builds(piece, some_tags, intervals, st.booleans(), st.booleans(), st.booleans()),
    max_size=8,
)
