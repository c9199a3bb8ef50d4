"""A socket file that only its owner can reach, and that no other process takes away.

ZeroMQ itself would let anybody connect whom the umask lets, take over a path where another
process listens, and delete any file there.
"""

from __future__ import annotations

import fcntl
import os
import stat
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import zmq

from tagstream.errors import RunBusyError, SettingsError

_umask = threading.Lock()  # it belongs to the whole process


class PrivatePath:
    """The path of a socket, held for this process until it is closed.

    Raises RunBusyError when another process holds it, SettingsError when something else is there.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self._lock = _locked(path.with_name(path.name + ".lock"))
        try:
            _clear(path)
        except SettingsError:
            os.close(self._lock)
            raise

    def bind(self, socket: zmq.Socket[bytes]) -> None:
        """Bind a socket there; mode 600."""
        with _only_owner():
            socket.bind(f"ipc://{self.path}")

    def close(self) -> None:
        """Give the path back; after the socket is closed. The lock file stays."""
        self.path.unlink(missing_ok=True)
        os.close(self._lock)


@contextmanager
def _only_owner() -> Iterator[None]:
    with _umask:
        before = os.umask(0o177)
        try:
            yield
        finally:
            os.umask(before)


def _locked(path: Path) -> int:
    try:
        path.parent.mkdir(mode=0o700, parents=True, exist_ok=True)
        lock = os.open(path, os.O_RDWR | os.O_CREAT | os.O_NOFOLLOW, 0o600)
    except OSError as error:
        raise SettingsError(
            [f"{path}: cannot be made: {error.strerror}; right would be a folder of your own"]
        ) from None
    try:
        fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        holder = os.pread(lock, 20, 0).decode(errors="replace") or "unknown"
        os.close(lock)
        socket = path.with_suffix("")
        raise RunBusyError(
            f"{socket}: process {holder} listens there; stop it, or choose another address"
        ) from None
    os.ftruncate(lock, 0)
    os.pwrite(lock, str(os.getpid()).encode(), 0)
    return lock


def _clear(path: Path) -> None:
    """Remove a socket that a process left behind; anything else is not ours to remove."""
    try:
        mode = path.lstat().st_mode
    except FileNotFoundError:
        return
    if not stat.S_ISSOCK(mode):
        raise SettingsError([f"{path}: exists and is no socket; choose another address"])
    path.unlink()
