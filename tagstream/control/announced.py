"""Where a run can be asked: a small file in its folder, as long as it can be."""

from __future__ import annotations

import json
import os
import socket
from dataclasses import asdict, dataclass
from pathlib import Path

from tagstream.errors import ControlError
from tagstream.outputs.atomic import replace_file
from tagstream.outputs.folder import is_held

FILE = ".control"
TRANSPORTS = ("tcp://", "ipc://")


@dataclass(frozen=True, slots=True)
class Announced:
    """keys: the folder with keys, where they are needed. pid, host: of who answers."""

    address: str
    keys: str | None = None
    pid: int | None = None
    host: str | None = None


def announce(folder: Path, address: str, keys: Path | None = None) -> None:
    """Say in a run folder where its process answers. Raises ResultsError."""
    host = socket.gethostname()
    told = Announced(address, None if keys is None else str(keys), os.getpid(), host)
    replace_file(folder / FILE, json.dumps(asdict(told)).encode())


def withdraw(folder: Path) -> None:
    """Nobody answers for this run any more."""
    (folder / FILE).unlink(missing_ok=True)


def announced(run: str) -> Announced:
    """Where a run answers; `run` is its folder, the link to it, or an address.

    Raises ControlError, which says where to look, when no process answers for it.
    """
    if run.startswith(TRANSPORTS):
        return Announced(run)
    folder = Path(run)
    if folder.name == "latest.h5":
        folder = folder.parent
    if not (folder / "latest.h5").is_file():
        raise ControlError(
            f"{run}: no run: a folder that holds a latest.h5, the link to one, or an address such"
            " as ipc:///PATH would be right"
        )
    if not is_held(folder):
        raise ControlError(
            f"{run}: no process writes this run any more; how it ended: tagstream show {run}, and"
            f" the end of {folder / 'log.jsonl'}"
        )
    return _read(folder)


def _read(folder: Path) -> Announced:
    path = folder / FILE
    try:
        told = Announced(**json.loads(path.read_bytes()))
    except FileNotFoundError:
        raise ControlError(
            f"{folder}: a process writes this run but takes no requests: its settings have no"
            f" [control], or {folder / 'log.jsonl'} says why it is off"
        ) from None
    except (OSError, ValueError, TypeError) as error:
        raise ControlError(f"{path}: cannot be read: {error}") from None
    if told.host not in (None, socket.gethostname()) and told.address.startswith("ipc://"):
        raise ControlError(f"{folder}: written on {told.host}; ask from that machine")
    return told
