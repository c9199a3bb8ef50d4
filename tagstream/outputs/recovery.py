"""After a crash: what was left half open becomes ordinary files again."""

from __future__ import annotations

import os
from collections.abc import Mapping
from pathlib import Path

import h5py

from tagstream.outputs.folder import RunFolder, cannot_write
from tagstream.outputs.nodes import TEXT
from tagstream.outputs.reader import open_history, open_run
from tagstream.recording.recovery import recover_recordings

ENDED = ("finished", "stopped", "input_broken", "failed", "interrupted")


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
        done = [text for file in sorted(folder.glob("history-*.h5")) for text in _close(file)]
        done += recover_recordings(folder)
        return done + _end(folder)
    except (OSError, RuntimeError) as error:
        raise cannot_write(folder, error) from error


def _close(history: Path) -> list[str]:
    """A history that its writer did not close is copied to one that is closed."""
    if not _is_open(history):
        return []
    closed = history.with_name(f"{history.name}.tmp")
    with open_history(history) as old, h5py.File(closed, "w", libver=("v108", "v110")) as new:
        rows = min(table.shape[0] for table in old["run"].values())
        _copy_attributes(old.attrs, new.attrs)
        entry = new.create_group("run")
        _copy_attributes(old["run"].attrs, entry.attrs)
        for name, table in old["run"].items():
            copied = entry.create_dataset(name, data=table[:rows], dtype=table.dtype)
            _copy_attributes(table.attrs, copied.attrs)
    _settle(closed, history)
    return [f"{history.name}: {rows} rows; it was not closed, now it is an ordinary file"]


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
    if state in ENDED:
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


def _copy_attributes(old: Mapping[str, object], new: h5py.AttributeManager) -> None:
    for name, value in old.items():
        new[name] = value


def _settle(fresh: Path, path: Path) -> None:
    """On the disk before the name changes."""
    with fresh.open("rb") as file:
        os.fsync(file.fileno())
    os.replace(fresh, path)
