"""After a crash: what was left half open becomes ordinary files again."""

from __future__ import annotations

import errno
import os
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import h5py
from numpy.typing import NDArray

from tagstream.outputs import layout as at
from tagstream.outputs.disk import free_bytes
from tagstream.outputs.folder import RunFolder, cannot_write
from tagstream.outputs.nodes import TEXT
from tagstream.outputs.reader import open_history, open_run
from tagstream.recording.recovery import recover_recordings

DAMAGED = ".damaged"  # the end of the name of what no program can open
PIECE_ROWS = 4096  # copied at once: the history of weeks does not fit into memory
SPARE_BYTES = 4_000_000  # HDF5 crashes where a disk fills up while it closes a file
_FAILURES = (OSError, RuntimeError, KeyError, ValueError)  # of a file that is no history


class UnreadableError(Exception):
    """Nothing whole can be copied from a history."""


def recover(path: Path) -> list[str]:
    """Mend the run in a folder; a sentence for each thing that was done.

    Raises RunBusyError while a process writes the run, ResultsError where it cannot be mended.
    """
    folder = open_run(path).path
    held = RunFolder.hold(folder)  # removes what a crash left half written
    try:
        return mend(folder)
    finally:
        held.close()


def mend(folder: Path) -> list[str]:
    """The same, of a folder that is held."""
    try:
        done = [text for file in sorted(folder.glob("history-*.h5")) for text in _mend(file)]
        for place in _places_of_recordings(folder):
            done += recover_recordings(place)
        return done + _end(folder)
    except (OSError, RuntimeError) as error:
        raise cannot_write(folder, error) from error


def _places_of_recordings(folder: Path) -> list[Path]:
    """The run folder, and the one that its settings name for recordings."""
    try:
        settings = tomllib.loads((folder / "settings.toml").read_text())
    except (OSError, ValueError):
        return [folder]
    elsewhere = settings.get("recording", {}).get("folder")
    return [folder] if elsewhere is None else [folder, Path(elsewhere) / folder.name]


def _mend(history: Path) -> list[str]:
    """One that cannot be read must not keep the rest of a run from being read, or resumed."""
    if not _is_open(history):
        return []
    try:
        rows = _close(history)
    except UnreadableError as error:
        damaged = history.with_name(f"{history.name}{DAMAGED}")
        os.replace(history, damaged)
        return [f"{history.name}: cannot be read: {error.__cause__}; now {damaged.name}"]
    return [f"{history.name}: {rows} rows; it was not closed, now it is an ordinary file"]


def _close(history: Path) -> int:
    """A history that its writer did not close is copied to one that is closed; its rows."""
    if free_bytes(history.parent) < history.stat().st_size + SPARE_BYTES:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
    closed = history.with_name(f"{history.name}.tmp")
    try:
        with _opened(history) as old, h5py.File(closed, "w", libver=("v108", "v110")) as new:
            rows = _copy(old, new)
    except BaseException:
        closed.unlink(missing_ok=True)
        raise
    _settle(closed, history)
    return rows


def _opened(history: Path) -> h5py.File:
    try:
        return open_history(history)
    except _FAILURES as error:
        raise UnreadableError from error


def _copy(old: h5py.File, new: h5py.File) -> int:
    """All rows that are whole; how many there are."""
    try:
        tables = dict(old[at.ENTRY].items())
        rows = min(int(table.shape[0]) for table in tables.values())
        attributes = {name: dict(old[name].attrs) for name in ("/", at.ENTRY)}
        attributes |= {f"{at.ENTRY}/{name}": dict(table.attrs) for name, table in tables.items()}
    except _FAILURES as error:
        raise UnreadableError from error
    entry = new.create_group(at.ENTRY)
    for name, table in tables.items():
        copied = entry.create_dataset(name, (rows, table.shape[1]), dtype=table.dtype)
        for first, values in _pieces(table, rows):
            copied[first : first + len(values)] = values
    for name, found in attributes.items():
        for key, value in found.items():
            new[name].attrs[key] = value
    return rows


def _pieces(table: h5py.Dataset, rows: int) -> Iterator[tuple[int, NDArray[Any]]]:
    for first in range(0, rows, PIECE_ROWS):
        try:
            values = table[first : min(first + PIECE_ROWS, rows)]
        except _FAILURES as error:
            raise UnreadableError from error
        yield first, values


def _is_open(path: Path) -> bool:
    """Whether the superblock says that a writer has the file open (version 3, byte 11)."""
    with path.open("rb") as file:
        head = file.read(12)
    return len(head) == 12 and head[8] >= 3 and head[11] != 0


def _end(folder: Path) -> list[str]:
    """A latest.h5 whose process is gone says so."""
    latest = folder / "latest.h5"
    with h5py.File(latest, "r", locking=False) as file:
        state = file["run/health/state"].asstr()[()]
        updated = file["run/updated_utc"].asstr()[()]
    if state in at.ENDED:
        return []
    told = latest.with_name("latest.h5.tmp")
    told.write_bytes(latest.read_bytes())
    with h5py.File(told, "r+", locking=False) as file:
        _put_text(file["run/health"], "state", "interrupted")
        _put_text(file["run"], "end_time", updated)
    _settle(told, latest)
    return [f"latest.h5: last written {updated} while {state}; now says interrupted"]


def _put_text(group: h5py.Group, name: str, text: str) -> None:
    if name in group:
        del group[name]
    group.create_dataset(name, data=text, dtype=TEXT)


def _settle(fresh: Path, path: Path) -> None:
    """On the disk before the name changes."""
    with fresh.open("rb") as file:
        os.fsync(file.fileno())
    os.replace(fresh, path)
