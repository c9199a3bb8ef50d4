"""Answers requests in the thread that looks after a run.

A ROUTER socket, spoken to by REQ sockets. A REP socket would be shorter, but after a connection
that brought garbage it loses the next reply, or waits for ever for the rest of a message
(libzmq 4.3.5; the tests try both kinds of garbage).
"""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Mapping
from typing import Any

import zmq

from tagstream.control.requests import MOST_BYTES, BadRequestError, Request, parsed
from tagstream.errors import TagstreamError
from tagstream.outputs.plain_json import as_bytes
from tagstream.security import Sockets
from tagstream.security.sockets import SecuritySettings

MOST_AT_ONCE = 64  # requests in one look, so that a flood of them keeps nobody from other work
MOST_WAITING = 64  # requests of one client, and replies to one
ERROR_CHARACTERS = 1000


class ControlServer:
    """A socket at an address; `poll` it from one thread.

    handle: does what is asked and returns what the reply says besides "ok"; what it raises is the
    answer, and ends nothing. A larger message than MOST_BYTES ends the connection of its sender.
    Raises SettingsError, InputError or RunBusyError when the address cannot be bound.
    """

    def __init__(
        self,
        address: str,
        handle: Callable[[Request], Mapping[str, Any]],
        security: SecuritySettings | None = None,
    ) -> None:
        self._handle = handle
        self.answered = 0  # done as asked
        self.refused = 0  # not understood, or not done
        self._sockets = Sockets(security)
        try:
            self._socket = self._sockets.open(zmq.ROUTER)
            self._socket.setsockopt(zmq.MAXMSGSIZE, MOST_BYTES)
            self._socket.set_hwm(MOST_WAITING)
            self.address = self._sockets.bind(self._socket, address)
        except BaseException:
            self._sockets.close()
            raise

    @property
    def numbers(self) -> dict[str, int | float | str]:
        """For the health: requests answered and refused, clients not let in."""
        return {
            "control_answered": self.answered,
            "control_refused": self.refused,
            "control_denied": self._sockets.denied,
        }

    def poll(self, timeout_s: float) -> None:
        """Wait for a request up to `timeout_s`, and answer those that have come."""
        wait_ms = round(timeout_s * 1000)
        for _ in range(MOST_AT_ONCE):
            if not self._socket.poll(wait_ms):
                return
            wait_ms = 0
            with contextlib.suppress(zmq.Again):  # the rest of a message never came
                self._answer(self._socket.recv_multipart(zmq.NOBLOCK))

    def close(self) -> None:
        """Answer no more."""
        self._sockets.close()

    def _answer(self, frames: list[bytes]) -> None:
        """Reply to the one whose envelope it is: all frames up to an empty one.

        The reply to a client that is gone, or reads nothing, is dropped.
        """
        if b"" not in frames:
            self.refused += 1  # nobody who could read a reply sends that
            return
        end = frames.index(b"") + 1
        reply = self._reply(frames[end:])
        if reply["ok"]:
            self.answered += 1
        else:
            self.refused += 1
        with contextlib.suppress(zmq.ZMQError):
            self._socket.send_multipart([*frames[:end], as_bytes(reply)], zmq.NOBLOCK)

    def _reply(self, frames: list[bytes]) -> dict[str, Any]:
        try:
            if len(frames) != 1:
                raise BadRequestError(f"{len(frames)} frames; right would be one")
            return finished(self._handle(parsed(frames[0])))
        except (BadRequestError, TagstreamError) as error:
            return refusal(str(error))
        except Exception as error:  # a fault in here must not end a measurement
            return refusal(f"internal error: {type(error).__name__}: {error}")


def finished(content: Mapping[str, Any]) -> dict[str, Any]:
    """The reply to a request that was done. Raises TypeError when it is no JSON."""
    reply = {"ok": True, **content}
    as_bytes(reply)
    return reply


def refusal(error: str) -> dict[str, Any]:
    """The reply to a request that was not done."""
    return {"ok": False, "error": error[:ERROR_CHARACTERS]}
