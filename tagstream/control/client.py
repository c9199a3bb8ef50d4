"""Asks a run, from another process."""

from __future__ import annotations

import json
import time
from pathlib import Path
from typing import Any

import zmq

from tagstream.control.announced import Announced, announced
from tagstream.control.requests import Request, as_message
from tagstream.errors import ControlError
from tagstream.security import KeyFiles, Sockets
from tagstream.security.keys import SERVER
from tagstream.settings.sections import Security

TIMEOUT_S = 5.0
LOOK_MS = 100  # so that Ctrl-C is noticed


def ask_run(run: str, request: Request, keys: Path | None = None) -> dict[str, Any]:
    """Ask the process that writes a run; `run` is its folder, the link to it, or an address.

    keys: the folder with the keys of this side, absent: what the run says. Returns the reply.
    Raises ControlError when nobody answers, or the run refuses.
    """
    told = announced(run)
    folder = keys if keys is not None or told.keys is None else Path(told.keys)
    try:
        reply = ask(told.address, request, folder, TIMEOUT_S)
    except TimeoutError:
        raise ControlError(_silence(run, told)) from None
    if reply.pop("ok", None) is not True:
        raise ControlError(f"{run}: {reply.get('error', 'refused, without a reason')}")
    return reply


def ask(
    address: str, request: Request, keys: Path | None = None, timeout_s: float = TIMEOUT_S
) -> dict[str, Any]:
    """Send a request to an address and return the reply as it comes.

    keys: a folder as `tagstream keys` makes it; without, nothing is encrypted. Raises
    TimeoutError when nobody answers, ControlError when what comes is no reply.
    """
    with Sockets(None if keys is None else Security(keys=keys)) as sockets:
        socket = sockets.open(zmq.REQ)
        server_key = None if keys is None else KeyFiles(keys).public(SERVER)
        sockets.connect(socket, address, server_key)
        socket.send(as_message(request))
        _wait(socket, timeout_s)
        return _read(address, socket.recv())


def _wait(socket: zmq.Socket[bytes], timeout_s: float) -> None:
    last_s = time.monotonic() + timeout_s
    while not socket.poll(LOOK_MS):
        if time.monotonic() > last_s:
            raise TimeoutError


def _read(address: str, frame: bytes) -> dict[str, Any]:
    try:
        reply = json.loads(frame)
    except ValueError:
        reply = None
    if not isinstance(reply, dict):
        raise ControlError(f"{address}: answered with something else; is it a tagstream run?")
    return reply


def _silence(run: str, told: Announced) -> str:
    if told.pid is None:
        return (
            f"{run}: nobody answers; look whether the run goes on (tagstream show RUN), whether"
            " the address is that of its [control], and whether it asks for keys (--keys)"
        )
    return (
        f"{run}: process {told.pid} on {told.host} writes this run but does not answer at"
        f" {told.address}; look at its log.jsonl, and whether your key is in its [security]"
        " authorised"
    )
