"""Files that appear whole or not at all."""

from __future__ import annotations

import contextlib
import os
from pathlib import Path

from tagstream.outputs.folder import cannot_write


def replace_file(path: Path, content: bytes) -> None:
    """Put `content` at `path` so that a reader sees the old file or the new one, never a part.

    On the disk before the name changes, so that a power cut leaves one of both. Raises
    ResultsError; then the old file stands unchanged.
    """
    fresh = path.with_name(f"{path.name}.tmp")
    try:
        with fresh.open("wb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        os.replace(fresh, path)
        folder = os.open(path.parent, os.O_RDONLY)
        try:
            os.fsync(folder)
        finally:
            os.close(folder)
    except OSError as error:
        with contextlib.suppress(OSError):
            fresh.unlink()  # a part of it would take the room that is missing
        raise cannot_write(path, error) from error
