"""Where compiled kernels are kept, decided in this one place before any kernel is made.

A kernel compiled from other sources must never run, and numba does not notice a change in an
imported helper. So the folder carries a hash of every kernel source of the package; folders of
other sources go once they are a day old. Without a writable place kernels are compiled anew at
each start.
"""

from __future__ import annotations

import hashlib
import os
import shutil
import stat
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar, cast

import numba

from tagstream._version import __version__

F = TypeVar("F", bound=Callable[..., Any])
_PACKAGE = Path(__file__).parent


def source_hash() -> str:
    """Hex digest of the sources of all kernels (every file called kernels.py) and of this one."""
    digest = hashlib.sha256()
    for path in sorted([*_PACKAGE.rglob("kernels.py"), Path(__file__)]):
        digest.update(str(path.relative_to(_PACKAGE)).encode())
        digest.update(path.read_bytes())
    return digest.hexdigest()[:16]


def _root() -> Path | None:
    """The first folder of the usual order in which a cache may be made."""
    named = (os.environ.get("NUMBA_CACHE_DIR"), os.environ.get("CACHE_DIRECTORY"))
    home = os.environ.get("XDG_CACHE_HOME") or os.path.expanduser("~/.cache")
    for folder in (*named, home):
        if folder:
            return Path(folder) / "tagstream"
    return None


def _private(folder: Path) -> bool:
    """Whether `folder` can be made and is ours alone: the cache is executable code."""
    try:
        folder.mkdir(mode=0o700, parents=True, exist_ok=True)
        found = folder.stat()
    except OSError:
        return False
    safe = found.st_uid == os.getuid() and not found.st_mode & (stat.S_IWGRP | stat.S_IWOTH)
    return safe and os.access(folder, os.W_OK)


def prepare_cache() -> Path | None:
    """Point numba to the folder of these sources; return it, or None if there is no place."""
    root = _root()
    if root is None:
        return None
    folder = root / f"kernels-{__version__}-{source_hash()}"
    if not _private(root) or not _private(folder):
        return None
    _remove_old(root, keep=folder)
    numba.config.CACHE_DIR = str(folder)  # type: ignore[attr-defined]  # set at run time
    return folder


def _remove_old(root: Path, keep: Path) -> None:
    for old in root.glob("kernels-*"):
        try:
            if old != keep and time.time() - old.stat().st_mtime > 86_400:
                shutil.rmtree(old, ignore_errors=True)
        except OSError:
            continue  # another process removed it first


CACHE_FOLDER = prepare_cache()


def kernel(function: F) -> F:
    """Compile a kernel: integers and arrays only, no GIL, kept on disk when there is a place."""
    return cast(F, numba.njit(nogil=True, cache=CACHE_FOLDER is not None)(function))
