"""What a recording gets when nothing is added any more: logs of its marks, its end."""

from __future__ import annotations

import os
from pathlib import Path

import h5py

from tagstream.errors import ResultsError
from tagstream.recording.header import write_end
from tagstream.recording.layout import ENTRY, LIBVER, MARK_TABLE, MARKS
from tagstream.recording.marks import read_marks, write_logs


def complete(path: Path, origin_utc: str | None) -> None:
    """Add what cannot be added while a file grows; on the disk when this returns.

    Raises ResultsError when it cannot be written.
    """
    try:
        with h5py.File(path, "r+", libver=LIBVER) as file:
            entry = file[ENTRY]
            write_logs(entry[MARKS], read_marks(entry[MARK_TABLE]), origin_utc)
            write_end(entry)
            file.flush()
            os.fsync(file.id.get_vfd_handle())
    except (OSError, RuntimeError) as error:
        raise ResultsError(f"{path}: cannot be completed: {error}") from error
