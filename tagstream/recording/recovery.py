"""Recordings whose process was killed before it closed them: what was flushed is copied."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import h5py
import numpy as np

from tagstream.errors import ResultsError
from tagstream.recording.completion import complete
from tagstream.recording.layout import COVERAGE, ENTRY, EVENTS, GAPS, LIBVER, MARK_TABLE, SETTLED
from tagstream.recording.naming import give_name
from tagstream.recording.opening import text_of

PIECE = 1 << 20
# Which number in `settled` says how long a dataset is.
_LENGTHS = {
    f"{EVENTS}/event_id": 0,
    f"{EVENTS}/event_time_offset": 0,
    f"{EVENTS}/event_time_zero": 1,
    f"{EVENTS}/event_index": 1,
    f"{EVENTS}/cue_timestamp_zero": 2,
    f"{EVENTS}/cue_index": 2,
    f"{COVERAGE}/begin": 3,
    f"{COVERAGE}/end": 3,
    f"{COVERAGE}/first_event": 3,
    f"{COVERAGE}/flags": 3,
    f"{GAPS}/time": 4,
    f"{GAPS}/value": 4,
    MARK_TABLE: 5,
}


def recover_recordings(folder: Path) -> list[str]:
    """Make whole files of all that were left with a temporary name; a sentence for each.

    One that holds nothing, or cannot be read at all, keeps its temporary name.
    """
    return [recover_segment(part) for part in sorted(folder.glob("*.h5.part"))]


def recover_segment(part: Path) -> str:
    """Make a whole recording of one that was never closed; what was done, in words.

    Raises ResultsError when the copy cannot be written. The left-over goes when the copy stands.
    """
    path = part.with_name(part.name.removesuffix(".part"))
    copy = part.with_name(f"{part.name}.tmp")
    copy.unlink(missing_ok=True)
    try:
        with h5py.File(part, "r", swmr=True, locking=False) as old:
            settled = old[ENTRY][SETTLED][()].tolist()
            found = int(old[ENTRY][EVENTS]["event_id"].shape[0])
            utc = old[ENTRY].get("origin_utc")
            origin_utc = None if utc is None else text_of(utc[()])
            if settled[0] == 0:
                return f"{part.name}: nothing had been written yet; left as it is"
            with h5py.File(copy, "x", libver=LIBVER, rdcc_nbytes=0) as new:
                _copy(old, new, settled)
    except (OSError, KeyError, RuntimeError) as error:
        copy.unlink(missing_ok=True)
        return f"{part.name}: cannot be read: {error}; left as it is"
    complete(copy, origin_utc)
    if path.exists():
        copy.unlink()
        raise ResultsError(f"{path}: exists beside {part}; move one of them away")
    give_name(copy, path)
    part.unlink()
    lost = found - settled[0]
    return f"{path.name}: {settled[0]} tags, as flushed last; {lost} later ones were in no row yet"


def _copy(old: h5py.File, new: h5py.File, settled: list[int]) -> None:
    """All objects and attributes; columns up to the length that was settled."""
    for name, value in old.attrs.items():
        new.attrs[name] = value
    for place, node in _nodes(old):
        if isinstance(node, h5py.Group):
            made = new.require_group(place)
        else:
            made = _copy_dataset(node, new, place, settled)
        for name, value in node.attrs.items():
            made.attrs[name] = value


def _nodes(file: h5py.File) -> Iterator[tuple[str, h5py.Group | h5py.Dataset]]:
    found: list[tuple[str, h5py.Group | h5py.Dataset]] = []
    file.visititems(lambda name, node: found.append((name, node)))
    yield from found


def _copy_dataset(
    node: h5py.Dataset, new: h5py.File, place: str, settled: list[int]
) -> h5py.Dataset:
    slot = _LENGTHS.get(place.removeprefix(f"{ENTRY}/"))
    if slot is None:
        return new.create_dataset(place, data=node[()], dtype=node.dtype, chunks=node.chunks)
    length = min(settled[slot], node.shape[0])
    made = new.create_dataset(
        place, (length,), maxshape=(None,), chunks=node.chunks, dtype=node.dtype
    )
    for first in range(0, length, PIECE):
        last = min(first + PIECE, length)
        made[first:last] = np.asarray(node[first:last])
    return made
