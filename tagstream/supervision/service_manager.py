"""Messages to the service manager that started this process, if one did.

The protocol of sd_notify(3): datagrams to the socket that $NOTIFY_SOCKET names. Without that
variable nothing is sent.
"""

from __future__ import annotations

import contextlib
import os
import socket
import time
from collections.abc import Callable, MutableMapping

STARTING_S = 120  # how long kernels may compile before the service manager gives up


class ServiceManager:
    """Tells readiness, state, and that work goes on.

    The variables are taken out of the environment, so that no child speaks for this process.
    """

    def __init__(
        self,
        environment: MutableMapping[str, str] = os.environ,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self._address = environment.pop("NOTIFY_SOCKET", "")
        self._every_s = _watchdog_s(environment)
        self._clock, self._told_s = clock, clock()
        self._progress = -1

    def starting(self) -> None:
        """Kernels are compiled or loaded; ask for time."""
        self._send(f"STATUS=compiling kernels\nEXTEND_TIMEOUT_USEC={STARTING_S * 1_000_000}")

    def ready(self) -> None:
        """Tags are received from now on."""
        self._send("READY=1")

    def stopping(self) -> None:
        """A stop was asked for; results are being closed."""
        self._send(f"STOPPING=1\nEXTEND_TIMEOUT_USEC={STARTING_S * 1_000_000}")

    def status(self, text: str) -> None:
        """A line for whoever asks how the service is."""
        self._send(f"STATUS={text}")

    def alive(self, progress: int) -> None:
        """Pet the watchdog when due, and only if `progress` has moved since the last time."""
        if self._every_s is None or self._clock() - self._told_s < self._every_s:
            return
        if progress != self._progress:
            self._progress, self._told_s = progress, self._clock()
            self._send("WATCHDOG=1")

    def _send(self, text: str) -> None:
        if not self._address:
            return
        name = "\0" + self._address[1:] if self._address.startswith("@") else self._address
        # A service manager that is gone must not end a measurement.
        with contextlib.suppress(OSError), socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as out:
            out.connect(name)
            out.send(text.encode())


def _watchdog_s(environment: MutableMapping[str, str]) -> float | None:
    """A quarter of the time after which the watchdog bites; None where none watches us."""
    period = environment.pop("WATCHDOG_USEC", "")
    watched = environment.pop("WATCHDOG_PID", str(os.getpid()))
    if not period.isdigit() or watched != str(os.getpid()):
        return None
    return int(period) / 1e6 / 4
