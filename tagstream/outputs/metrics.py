"""Numbers of a run for Prometheus, as text over HTTP, on this machine unless told otherwise.

The counting thread only leaves references to what it has anyway; metrics are made from them when
somebody asks, in the thread that answers.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from importlib import import_module
from typing import Any

from tagstream.errors import ResultsError, SettingsError
from tagstream.outputs import Row, RunHeader, Snapshot


class Metrics:
    """A sink that serves metrics. clock: Unix time.

    Raises SettingsError when the library is missing, ResultsError when the address cannot be
    bound. address: (host, port) where it listens; port 0 is replaced by the one chosen.
    """

    def __init__(
        self, listen: str, header: RunHeader, clock: Callable[[], float] = time.time
    ) -> None:
        library, families = _library(), import_module("tagstream.outputs.metric_families")
        self._clock = clock
        self._known = families.Known(header, updated_s=clock())
        registry = library.CollectorRegistry()
        registry.register(families.RunCollector(self._known))
        host, _, port = listen.rpartition(":")
        try:
            self._server, self._thread = library.start_http_server(
                int(port), addr=host.strip("[]"), registry=registry
            )
        except OSError as error:
            raise ResultsError(
                f"[metrics] listen: {listen} cannot be bound: {error.strerror or error};"
                " stop what uses it, or choose another address"
            ) from None
        self.address: tuple[str, int] = self._server.server_address[:2]

    def add_row(self, row: Row) -> None:
        """Remember the newest slice."""
        self._known.row = row
        self._known.updated_s = self._clock()

    def snapshot_due(self) -> bool:
        """Never by itself: the health is remembered along with other results."""
        return False

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        """Remember the newest health."""
        self._known.health = snapshot.health
        self._known.updated_s = self._clock()

    def renew(self, header: RunHeader) -> None:
        """Name what follows after another header."""
        self._known.header = header

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        """Events are no metrics."""

    def close(self, snapshot: Snapshot) -> None:
        """Stop listening."""
        self._server.shutdown()
        self._server.server_close()
        self._thread.join()


def _library() -> Any:
    try:
        return import_module("prometheus_client")
    except ImportError:
        raise SettingsError(
            [
                "[metrics]: the library that serves metrics is not installed; right would be"
                " pip install 'tagstream[metrics]', or no [metrics]"
            ]
        ) from None
