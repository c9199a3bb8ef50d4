"""A control server in a thread of its own, as the main thread of a run would poll it."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from typing import Any

from tagstream.control import Request
from tagstream.control.server import ControlServer

POLL_S = 0.02


@contextmanager
def answering(
    address: str, handle: Callable[[Request], Mapping[str, Any]], security: Any = None
) -> Iterator[ControlServer]:
    """A server that answers until the end of the block."""
    server = ControlServer(address, handle, security)
    stop = threading.Event()

    def run() -> None:
        while not stop.is_set():
            server.poll(POLL_S)
        server.close()

    thread = threading.Thread(target=run)
    thread.start()
    try:
        yield server
    finally:
        stop.set()
        thread.join()
