"""How much room a disk has."""

from __future__ import annotations

import os
from pathlib import Path


def free_bytes(folder: Path) -> int:
    """What an ordinary user may still write on the disk of a folder; 0 when nobody can tell."""
    try:
        found = os.statvfs(folder)
    except OSError:
        return 0
    return found.f_bavail * found.f_frsize
