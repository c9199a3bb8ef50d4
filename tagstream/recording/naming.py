"""How a file comes to its name: under a temporary one first, never in place of another."""

from __future__ import annotations

import os
from pathlib import Path

import h5py

from tagstream._version import __version__
from tagstream.errors import ResultsError
from tagstream.recording.header import utc_now
from tagstream.recording.layout import ENTRY, LIBVER


def make_file(path: Path, part: Path) -> h5py.File:
    """A new HDF5 file `part` that will become `path`. Raises ResultsError if either exists."""
    if path.exists():
        raise ResultsError(f"{path}: exists and is not overwritten; give another name")
    if not path.parent.is_dir():
        raise ResultsError(f"{path}: there is no folder {path.parent}")
    try:
        file = h5py.File(part, "x", libver=LIBVER, rdcc_nbytes=0)
    except OSError as error:
        if "exists" in str(error):
            raise ResultsError(
                f"{part}: exists: another program writes it, or a recording was interrupted;"
                " give another name, or move it away"
            ) from None
        raise ResultsError(f"{part}: cannot be made: {error}") from None
    file.attrs["NX_class"] = "NXroot"
    file.attrs["default"] = ENTRY
    file.attrs["creator"] = "tagstream"
    file.attrs["creator_version"] = __version__
    file.attrs["file_time"] = utc_now()
    return file


def give_name(part: Path, path: Path) -> None:
    """Rename `part` to `path`. Raises ResultsError if a file of that name appeared meanwhile."""
    taken = f"{path}: was made by another program meanwhile; the recording is {part}"
    try:
        os.link(part, path)  # unlike a rename, this fails when the name is taken
    except FileExistsError:
        raise ResultsError(taken) from None
    except OSError:  # a file system without hard links
        if path.exists():
            raise ResultsError(taken) from None
        part.rename(path)
    else:
        part.unlink()
    folder = os.open(path.parent, os.O_RDONLY)
    try:
        os.fsync(folder)
    finally:
        os.close(folder)
