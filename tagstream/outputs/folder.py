"""The folder of a run: its own from the start, and locked while somebody writes it."""

from __future__ import annotations

import contextlib
import errno
import fcntl
import json
import os
import socket
from datetime import UTC, datetime
from pathlib import Path

from tagstream.errors import ResultsError, RunBusyError

LOCK = ".lock"
MOST_RUNS = 9999


class RunFolder:
    """A folder of one run, held by this process until it ends.

    path: the folder. Made with `create`; `close` gives up the lock.
    """

    def __init__(self, path: Path, lock: int) -> None:
        self.path = path
        self._lock = lock

    @classmethod
    def create(cls, parent: Path, name: str) -> RunFolder:
        """Make parent/name-NNNN, NNNN the next free number, and point parent/name to it.

        Raises ResultsError when it cannot be made.
        """
        try:
            parent.mkdir(parents=True, exist_ok=True)
            path = _make_next(parent, name)
            folder = cls.hold(path)
            _point(parent / name, path)
        except OSError as error:
            raise cannot_write(parent, error) from error
        return folder

    @classmethod
    def hold(cls, path: Path) -> RunFolder:
        """Lock an existing run folder. Raises RunBusyError when another process holds it."""
        lock = os.open(path / LOCK, os.O_RDWR | os.O_CREAT, 0o644)
        try:
            fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            holder = os.read(lock, 1000).decode(errors="replace").strip() or "another process"
            os.close(lock)
            raise RunBusyError(
                f"{path}: written by {holder}; stop that process, or choose another name"
            ) from None
        started = datetime.now(UTC).isoformat(timespec="seconds")
        own = {"pid": os.getpid(), "host": socket.gethostname(), "since": started}
        os.ftruncate(lock, 0)
        os.write(lock, json.dumps(own).encode())
        for leftover in path.glob("*.tmp"):
            leftover.unlink()
        return cls(path, lock)

    def close(self) -> None:
        """Give up the lock."""
        os.close(self._lock)


def is_held(path: Path) -> bool:
    """Whether some process writes the run in folder `path`."""
    try:
        lock = os.open(path / LOCK, os.O_RDONLY)
    except OSError:
        return False
    try:
        fcntl.flock(lock, fcntl.LOCK_SH | fcntl.LOCK_NB)
    except BlockingIOError:
        return True
    finally:
        os.close(lock)
    return False


def cannot_write(path: Path, error: OSError) -> ResultsError:
    """What an operating-system error while writing at `path` means for a person."""
    advice = {
        errno.ENOSPC: "make room on that disk, or choose another [results] folder",
        errno.EDQUOT: "make room in your quota, or choose another [results] folder",
        errno.EROFS: "that disk is read-only; choose another [results] folder",
        errno.EACCES: "allow this user to write there, or choose another [results] folder",
        errno.ENOTDIR: "a file stands where a folder is needed; choose another [results] folder",
        errno.EEXIST: "a file stands where a folder is needed; choose another [results] folder",
    }
    why = error.strerror or str(error)
    right = advice.get(error.errno or 0, "choose another [results] folder")
    return ResultsError(f"{path}: results cannot be written: {why}; {right}")


def _make_next(parent: Path, name: str) -> Path:
    """mkdir is atomic: of two processes that want a number, one gets the next."""
    taken = [p.name.removeprefix(f"{name}-") for p in parent.glob(f"{name}-[0-9][0-9][0-9][0-9]")]
    number = max((int(text) for text in taken if text.isdigit()), default=0)
    while number < MOST_RUNS:
        number += 1
        with contextlib.suppress(FileExistsError):
            path = parent / f"{name}-{number:04d}"
            path.mkdir()
            return path
    raise ResultsError(
        f"{parent}: {name}-{MOST_RUNS} exists already; choose another [results] name"
    )


def _point(link: Path, path: Path) -> None:
    """Let `link` point to `path`, replacing an older link at once; leave other things alone."""
    if link.exists() and not link.is_symlink():
        raise ResultsError(
            f"{link}: is no link to a run; choose another [results] name, or move it"
        )
    fresh = link.with_name(f".{path.name}.link")
    with contextlib.suppress(FileNotFoundError):
        fresh.unlink()
    fresh.symlink_to(path.name)
    os.replace(fresh, link)
