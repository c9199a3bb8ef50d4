"""The folder of a run: its own from the start, and locked while somebody writes it."""

from __future__ import annotations

import contextlib
import errno
import fcntl
import json
import os
import re
import socket
import time
from datetime import UTC, datetime
from pathlib import Path

from tagstream.errors import ResultsError, RunBusyError

LOCK = ".lock"
MOST_RUNS = 9999
LOCK_TRIES = 5  # a reader that asks `is_held` holds the lock for an instant
LOCK_WAIT_S = 0.02


class RunFolder:
    """A folder of one run, held by this process until it ends.

    path: the folder. Made with `create`; `announce` once it holds results; `close` gives up
    the lock.
    """

    def __init__(self, path: Path, lock: int) -> None:
        self.path = path
        self._lock = lock

    @classmethod
    def create(cls, parent: Path, name: str) -> RunFolder:
        """Make parent/name-NNNN, NNNN the next free number, and lock it.

        Raises ResultsError when it cannot be made.
        """
        link = parent / name
        try:
            if link.exists() and not link.is_symlink():
                raise ResultsError(
                    f"{link}: is no link to a run; choose another [results] name, or move it"
                )
            parent.mkdir(parents=True, exist_ok=True)
            return cls.hold(_make_next(parent, name))
        except OSError as error:
            raise cannot_write(parent, error) from error

    @classmethod
    def hold(cls, path: Path) -> RunFolder:
        """Lock an existing run folder, and remove what a crash left half written.

        Raises RunBusyError when another process holds it, ResultsError when it cannot be locked.
        """
        try:
            lock = os.open(path / LOCK, os.O_RDWR | os.O_CREAT, 0o644)
        except OSError as error:
            raise cannot_write(path, error) from error
        try:
            _lock(lock, path)
            _sign(lock)
            for leftover in path.glob("*.tmp"):
                leftover.unlink()
        except BaseException as error:
            os.close(lock)
            if isinstance(error, OSError):
                raise cannot_write(path, error) from error
            raise
        return cls(path, lock)

    def announce(self) -> None:
        """Point the link parent/name to the newest run that holds results.

        To be called when this one does. Raises ResultsError.
        """
        name, _, _ = self.path.name.rpartition("-")
        try:
            _point(self.path, name)
        except OSError as error:
            raise cannot_write(self.path.parent / name, error) from error

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
        return not _flock(lock, fcntl.LOCK_SH)
    except OSError:  # a file system without locks cannot tell
        return False
    finally:
        os.close(lock)


def cannot_write(path: Path, error: Exception) -> ResultsError:
    """What an error of the operating system while writing at `path` means for a person.

    HDF5 tells the number of such an error inside its text only.
    """
    advice = {
        errno.ENOSPC: "make room on that disk, or choose another [results] folder",
        errno.EDQUOT: "make room in your quota, or choose another [results] folder",
        errno.EROFS: "that disk is read-only; choose another [results] folder",
        errno.EACCES: "allow this user to write there, or choose another [results] folder",
        errno.ENOTDIR: "a file stands where a folder is needed; choose another [results] folder",
        errno.EEXIST: "a file stands where a folder is needed; choose another [results] folder",
    }
    inside = re.search(r"errno = (\d+)", str(error))
    number = getattr(error, "errno", None) or (int(inside[1]) if inside else 0)
    why = os.strerror(number) if number else str(error)
    right = advice.get(number, "choose another [results] folder")
    return ResultsError(f"{path}: results cannot be written: {why}; {right}")


def _flock(lock: int, kind: int) -> bool:
    """Whether the lock was free and is ours now."""
    try:
        fcntl.flock(lock, kind | fcntl.LOCK_NB)
    except BlockingIOError:
        return False
    return True


def _lock(lock: int, path: Path) -> None:
    for _ in range(LOCK_TRIES):
        if _flock(lock, fcntl.LOCK_EX):
            return
        time.sleep(LOCK_WAIT_S)
    holder = os.read(lock, 1000).decode(errors="replace").strip() or "another process"
    raise RunBusyError(f"{path}: written by {holder}; stop that process, or choose another name")


def _sign(lock: int) -> None:
    """Write into the lock file who holds it, for people."""
    started = datetime.now(UTC).isoformat(timespec="seconds")
    own = {"pid": os.getpid(), "host": socket.gethostname(), "since": started}
    os.ftruncate(lock, 0)
    os.write(lock, json.dumps(own).encode())


def _runs(parent: Path, name: str) -> dict[int, Path]:
    """The runs of that name by number."""
    start = f"{name}-"
    tails = {p: p.name.removeprefix(start) for p in parent.iterdir() if p.name.startswith(start)}
    return {int(tail): path for path, tail in tails.items() if re.fullmatch("[0-9]{4}", tail)}


def _make_next(parent: Path, name: str) -> Path:
    """mkdir is atomic: of two processes that want a number, one gets the next."""
    number = max(_runs(parent, name), default=0)
    while number < MOST_RUNS:
        number += 1
        with contextlib.suppress(FileExistsError):
            path = parent / f"{name}-{number:04d}"
            path.mkdir()
            return path
    raise ResultsError(
        f"{parent}: {name}-{MOST_RUNS} exists already; choose another [results] name"
    )


def newest_run(parent: Path, name: str) -> Path | None:
    """The newest run of that name that holds results."""
    return _newest(parent, name) if parent.is_dir() else None


def _point(run: Path, name: str) -> None:
    """Let the link point to the newest run, replacing an older link at once.

    Looks again afterwards: another process may have announced a newer run in between.
    """
    link, fresh = run.with_name(name), run.with_name(f".{run.name}.link")
    pointed = None
    while (newest := _newest(run.parent, name)) not in (None, pointed):
        fresh.unlink(missing_ok=True)
        fresh.symlink_to(newest.name)
        os.replace(fresh, link)
        pointed = newest


def _newest(parent: Path, name: str) -> Path | None:
    runs = _runs(parent, name)
    ready = [number for number, path in runs.items() if (path / "latest.h5").exists()]
    return runs[max(ready)] if ready else None
